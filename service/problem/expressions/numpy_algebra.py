"""Plain floating-point values at points."""

from collections.abc import Callable
from fractions import Fraction

import numpy as np

from service.problem.expressions.rounding import Floats


class NumpyAlgebra:
    """Reads an expression as double arrays; variables are arrays of one broadcastable shape.

    Where the expression has no value, or none that a double holds, the result is nan or infinite; nothing
    is raised or warned about.

    >>> from service.problem.expressions.parser import parse
    >>> points = {"x": np.array([0.0, 1.0, 2.0]), "y": np.array([1.0, 1.0, 0.0])}
    >>> parse("x^2/y").read(NumpyAlgebra(), points).tolist()
    [0.0, 1.0, inf]
    """

    def constant(self, value: Fraction) -> Floats:
        try:
            return np.array(value.numerator / value.denominator)
        except OverflowError:
            return np.array(np.inf if value > 0 else -np.inf)

    def pi(self) -> Floats:
        return np.array(np.pi)

    def add(self, a: Floats, b: Floats) -> Floats:
        return quietly(np.add, a, b)

    def subtract(self, a: Floats, b: Floats) -> Floats:
        return quietly(np.subtract, a, b)

    def multiply(self, a: Floats, b: Floats) -> Floats:
        return quietly(np.multiply, a, b)

    def divide(self, a: Floats, b: Floats) -> Floats:
        return quietly(np.divide, a, b)

    def negate(self, a: Floats) -> Floats:
        return quietly(np.negative, a)

    def integer_power(self, a: Floats, exponent: int) -> Floats:
        return quietly(np.power, a, np.float64(exponent))

    def sin(self, a: Floats) -> Floats:
        return quietly(np.sin, a)

    def cos(self, a: Floats) -> Floats:
        return quietly(np.cos, a)

    def tan(self, a: Floats) -> Floats:
        return quietly(np.tan, a)

    def exp(self, a: Floats) -> Floats:
        return quietly(np.exp, a)

    def log(self, a: Floats) -> Floats:
        return quietly(np.log, a)

    def sqrt(self, a: Floats) -> Floats:
        return quietly(np.sqrt, a)

    def tanh(self, a: Floats) -> Floats:
        return quietly(np.tanh, a)

    def absolute(self, a: Floats) -> Floats:
        return quietly(np.abs, a)

    def minimum(self, a: Floats, b: Floats) -> Floats:
        return quietly(np.minimum, a, b)

    def maximum(self, a: Floats, b: Floats) -> Floats:
        return quietly(np.maximum, a, b)

    def sign(self, a: Floats) -> Floats:
        return quietly(np.sign, a)

    def choose(self, condition: Floats, positive: Floats, negative: Floats) -> Floats:
        tie = quietly(np.divide, quietly(np.add, positive, negative), np.float64(2))
        chosen = np.where(condition > 0, positive, np.where(condition < 0, negative, tie))
        return np.where(np.isnan(condition), np.nan, chosen)


def quietly(function: Callable[..., Floats], *arguments: Floats | np.float64) -> Floats:
    """A NumPy function without its warnings."""
    with np.errstate(all="ignore"):
        return function(*arguments)
