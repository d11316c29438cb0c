"""Arithmetic of intervals with proved outward rounding, elementwise on arrays of any shape.

Every result encloses the exact image of its operands. Where an operation may lack a value (a divisor or the
argument of a root or logarithm is not proved to be in its domain), the result is (-inf, inf) and marked.
"""

from collections.abc import Callable
from fractions import Fraction

import numpy as np

from service.problem.expressions import periodic
from service.problem.expressions.interval import Flags, Interval, between
from service.problem.expressions.rounding import (
    QUIETLY,
    Floats,
    down,
    enclosed,
    function_above,
    function_below,
    monotone_power,
    product_above,
    product_below,
    sum_above,
    sum_below,
    up,
)


class IntervalAlgebra:
    """Reads an expression as enclosures on boxes; variables are ``Interval`` of one broadcastable shape."""

    def constant(self, value: Fraction) -> Interval:
        lower, upper = enclosed(value)
        return between(np.array(lower), np.array(upper))

    def pi(self) -> Interval:
        """math.pi is the double just below pi."""
        return between(np.array(np.pi), up(np.array(np.pi)))

    @QUIETLY
    def add(self, a: Interval, b: Interval) -> Interval:
        return combined(sum_below(a.lower, b.lower), sum_above(a.upper, b.upper), a, b)

    def subtract(self, a: Interval, b: Interval) -> Interval:
        return self.add(a, self.negate(b))

    def negate(self, a: Interval) -> Interval:
        return combined(-a.upper, -a.lower, a)

    @QUIETLY
    def multiply(self, a: Interval, b: Interval) -> Interval:
        corners = [p * q for p in (a.lower, a.upper) for q in (b.lower, b.upper)]
        return combined(*extremes(corners, a, b), a, b)

    @QUIETLY
    def divide(self, a: Interval, b: Interval) -> Interval:
        possible = (b.lower > 0) | (b.upper < 0)
        corners = [p / q for p in (a.lower, a.upper) for q in (b.lower, b.upper)]
        lower, upper = extremes(corners, a, b)
        return where_possible(lower, upper, possible, (b.lower == 0) & (b.upper == 0), a, b)

    @QUIETLY
    def integer_power(self, a: Interval, exponent: int) -> Interval:
        if exponent < 0:
            return self.integer_power(self.divide(self.constant(Fraction(1)), a), -exponent)
        if exponent == 0:
            return combined(np.ones(a.lower.shape), np.ones(a.lower.shape), a)
        small, large = self.absolute(a).lower, self.absolute(a).upper
        below = monotone_power(small, exponent, product_below)
        above = monotone_power(large, exponent, product_above)
        if exponent % 2 == 0:
            return combined(below, above, a)
        # An odd power grows with its base; each end has its own sign.
        lower = np.where(a.lower >= 0, below, -monotone_power(np.abs(a.lower), exponent, product_above))
        upper = np.where(a.upper <= 0, -below, monotone_power(np.abs(a.upper), exponent, product_above))
        return combined(lower, upper, a)

    def sin(self, a: Interval) -> Interval:
        return combined(*periodic.sine(a.lower, a.upper), a)

    def cos(self, a: Interval) -> Interval:
        return combined(*periodic.cosine(a.lower, a.upper), a)

    def tan(self, a: Interval) -> Interval:
        """Between its poles the tangent grows; where a pole is not excluded there is no bound."""
        possible = ~periodic.may_contain(a.lower, a.upper, 0.5, np.pi)
        return where_possible(*grown(np.tan, a), possible, np.zeros_like(possible), a)

    def exp(self, a: Interval) -> Interval:
        lower, upper = grown(np.exp, a)
        return combined(np.maximum(lower, 0.0), upper, a)

    def log(self, a: Interval) -> Interval:
        return where_possible(*grown(np.log, a), a.lower > 0, a.upper <= 0, a)

    @QUIETLY
    def sqrt(self, a: Interval) -> Interval:
        lower = np.maximum(down(np.sqrt(a.lower)), 0.0)
        upper = np.where(a.upper == 0, 0.0, up(np.sqrt(a.upper)))
        return where_possible(lower, upper, a.lower >= 0, a.upper < 0, a)

    def tanh(self, a: Interval) -> Interval:
        lower, upper = grown(np.tanh, a)
        lower = np.maximum(lower, np.where(a.lower >= 0, 0.0, -1.0))
        upper = np.minimum(upper, np.where(a.upper <= 0, 0.0, 1.0))
        return combined(lower, upper, a)

    def absolute(self, a: Interval) -> Interval:
        lower = np.maximum(np.maximum(a.lower, -a.upper), 0.0)
        return combined(lower, np.maximum(-a.lower, a.upper), a)

    def minimum(self, a: Interval, b: Interval) -> Interval:
        return combined(np.minimum(a.lower, b.lower), np.minimum(a.upper, b.upper), a, b)

    def maximum(self, a: Interval, b: Interval) -> Interval:
        return combined(np.maximum(a.lower, b.lower), np.maximum(a.upper, b.upper), a, b)

    def sign(self, a: Interval) -> Interval:
        """-1, 0 or 1, and what lies between where the sign is not decided."""
        return combined(np.sign(a.lower), np.sign(a.upper), a)

    def choose(self, condition: Interval, positive: Interval, negative: Interval) -> Interval:
        """The chosen branch, which alone must be defined; the hull of both where it is not decided."""
        above, below = condition.lower > 0, condition.upper < 0
        both = positive.hull(negative)
        return combined(
            np.where(above, positive.lower, np.where(below, negative.lower, both.lower)),
            np.where(above, positive.upper, np.where(below, negative.upper, both.upper)),
            condition,
            Interval(
                both.lower,
                both.upper,
                np.where(above, positive.defined, np.where(below, negative.defined, both.defined)),
                np.where(above, positive.undefined, np.where(below, negative.undefined, both.undefined)),
            ),
        )


def combined(lower: Floats, upper: Floats, *operands: Interval) -> Interval:
    """An interval that is defined where all operands are, undefined where one is."""
    defined: Flags = np.asarray(True)
    undefined: Flags = np.asarray(False)
    for operand in operands:
        defined = defined & operand.defined
        undefined = undefined | operand.undefined
    return Interval(lower, upper, defined, undefined)


def where_possible(
    lower: Floats, upper: Floats, possible: Flags, impossible: Flags, *operands: Interval
) -> Interval:
    """The ends given where the operation is proved to have a value, (-inf, inf) and marks elsewhere."""
    whole = combined(np.where(possible, lower, -np.inf), np.where(possible, upper, np.inf), *operands)
    return Interval(whole.lower, whole.upper, whole.defined & possible, whole.undefined | impossible)


def extremes(corners: list[Floats], a: Interval, b: Interval) -> tuple[Floats, Floats]:
    """Outward ends of a product or quotient from its rounded values at the corners.

    0 inf and inf / inf stand for 0: an infinite end is a missing bound, not a number. The sign of the exact
    result is known from the operands, also where a corner underflows.
    """
    numbers = [np.where(np.isnan(corner), 0.0, corner) for corner in corners]
    lower = down(np.minimum(np.minimum(numbers[0], numbers[1]), np.minimum(numbers[2], numbers[3])))
    upper = up(np.maximum(np.maximum(numbers[0], numbers[1]), np.maximum(numbers[2], numbers[3])))
    zero = ((a.lower == 0) & (a.upper == 0)) | ((b.lower == 0) & (b.upper == 0))
    same = ((a.lower >= 0) & (b.lower >= 0)) | ((a.upper <= 0) & (b.upper <= 0)) | zero
    opposite = ((a.lower >= 0) & (b.upper <= 0)) | ((a.upper <= 0) & (b.lower >= 0)) | zero
    return np.where(same, np.maximum(lower, 0.0), lower), np.where(opposite, np.minimum(upper, 0.0), upper)


@QUIETLY
def grown(function: Callable[[Floats], Floats], a: Interval) -> tuple[Floats, Floats]:
    """Outward ends of an increasing function; anything outside its domain."""
    return function_below(function(a.lower)), function_above(function(a.upper))
