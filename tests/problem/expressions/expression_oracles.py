"""Random expressions, and two ways of evaluating them that share nothing with the service's arithmetic."""

import math

import mpmath
from hypothesis import HealthCheck, settings
from hypothesis import strategies as st

from service.problem.expressions.expression import Expression


def examples(number):
    """So many examples, however slow the machine and however many have no value where they are tried."""
    unhurried = [HealthCheck.too_slow, HealthCheck.filter_too_much]
    return settings(max_examples=number, deadline=None, suppress_health_check=unhurried)


class UndefinedError(Exception):
    """The expression has no real value here."""


class Multiprecision:
    """Reads an expression in mpmath's current precision; raises UndefinedError outside the domain."""

    def constant(self, value):
        return mpmath.mpf(value.numerator) / value.denominator

    def pi(self):
        return +mpmath.pi

    def add(self, a, b):
        return a + b

    def subtract(self, a, b):
        return a - b

    def multiply(self, a, b):
        return a * b

    def divide(self, a, b):
        if b == 0:
            raise UndefinedError
        return a / b

    def negate(self, a):
        return -a

    def integer_power(self, a, exponent):
        if a == 0 and exponent < 0:
            raise UndefinedError
        return a**exponent

    def exp(self, a):
        if a > 2000:
            raise OverflowError
        return mpmath.exp(a)

    def log(self, a):
        if a <= 0:
            raise UndefinedError
        return mpmath.log(a)

    def sqrt(self, a):
        if a < 0:
            raise UndefinedError
        return mpmath.sqrt(a)

    def sin(self, a):
        return mpmath.sin(a)

    def cos(self, a):
        return mpmath.cos(a)

    def tan(self, a):
        return mpmath.tan(a)

    def tanh(self, a):
        return mpmath.tanh(a)

    def absolute(self, a):
        return abs(a)

    def minimum(self, a, b):
        return min(a, b)

    def maximum(self, a, b):
        return max(a, b)

    def sign(self, a):
        return mpmath.sign(a)

    def choose(self, condition, positive, negative):
        if condition == 0:
            return (positive + negative) / 2
        return positive if condition > 0 else negative


def true_value(expression: Expression, **coordinates):
    """The value to at least 40 digits; None where digits are lost, UndefinedError where there is none."""
    found = []
    for bits in (300, 900):
        with mpmath.workprec(bits):
            numbers = {name: mpmath.mpf(value) for name, value in coordinates.items()}
            found.append(expression.read(Multiprecision(), numbers))
    rough, fine = found
    with mpmath.workprec(300):
        return fine if abs(rough - fine) <= abs(fine) * mpmath.mpf(10) ** -40 else None


def python_value(text: str, **coordinates):
    """What Python makes of the same text; its precedence of + - * / ** and signs is the one we promise."""
    functions = {name: getattr(math, name) for name in ("sin", "cos", "tan", "exp", "log", "sqrt", "tanh")}
    names = {"__builtins__": {}, "abs": abs, "min": min, "max": max, "pi": math.pi, **functions}
    return eval(text.replace("^", "**"), names, coordinates)


SMOOTH = ("sin", "cos", "tan", "exp", "log", "sqrt", "tanh")
NUMBERS = st.one_of(
    st.integers(0, 9).map(str),
    st.decimals(0, 20, places=2).map(str),
    st.sampled_from(["1e-3", "2.5E1", ".5", "3.", "0.1"]),
)
LEAVES = st.one_of(NUMBERS, st.sampled_from(["x", "y", "x", "y", "pi"]))
EXPONENTS = st.sampled_from(["2", "3", "4", "0.5", "1.5", "-1", "-2", "(1/2)", "0", "1", "0.3", "-x", "y"])


@st.composite
def texts(draw, depth=3, kinks=True):
    """Texts of random expressions in x and y, some of them without a value everywhere."""
    kinds = ["leaf", "chain", "chain", "operation", "minus", "power", "function", "function"]
    kind = draw(st.sampled_from(kinds + ["kink"] * kinks if depth else ["leaf"]))

    def part():
        return draw(texts(depth - 1, kinks))

    def operand():
        return draw(LEAVES) if draw(st.booleans()) else f"({part()})"

    match kind:
        case "chain":
            return f"{part()}{draw(st.sampled_from('+-*/'))}{part()}"
        case "operation":
            return f"{operand()} {draw(st.sampled_from('+-*/'))} {operand()}"
        case "minus":
            return f"-{operand()}"
        case "power":
            return f"{operand()}^{draw(EXPONENTS)}"
        case "function":
            return f"{draw(st.sampled_from(SMOOTH))}({part()})"
        case "kink":
            name = draw(st.sampled_from(["abs", "min", "max"]))
            return f"abs({part()})" if name == "abs" else f"{name}({part()}, {part()})"
        case _:
            return draw(LEAVES)


COORDINATES = st.one_of(
    st.floats(-4, 4, allow_subnormal=False), st.integers(-4, 4).map(float), st.floats(-1e3, 1e3)
)


