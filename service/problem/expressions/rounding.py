"""Outward rounding: numbers proved to lie below or above a sum, product, quotient or function value.

Assumptions, stated once: IEEE 754 double arithmetic, rounding to nearest, with gradual underflow;
NumPy's exp, log and tanh are accurate to FUNCTION_ULPS units in the last place for every double, its sin,
cos and tan for arguments up to FARTHEST_ANGLE in size (tests compare them with multiple precision).
Lower ends are never +inf, upper ends never -inf; an infinite end means «no bound».
"""

from collections.abc import Callable
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]

FUNCTION_ULPS = 4
"""Assumed accuracy of NumPy's elementary functions, in units in the last place."""

FARTHEST_ANGLE = 2.0**26
"""Size up to which sines are relied upon: at cos(6381956970095103 2^797) a common C library is 8 units off."""

UNIT = 2.0**-53
"""Unit roundoff."""

SMALLEST = 2.0**-1074
"""The least positive double."""

LARGEST = float(np.finfo(np.float64).max)
"""The largest finite double."""

QUIETLY = np.errstate(over="ignore", under="ignore", invalid="ignore", divide="ignore")
"""Decorates functions in which overflow and infinite operands are meant; their results say what they cost."""


def down(x: Floats) -> Floats:
    """The next double below, for each element."""
    return np.nextafter(x, -np.inf)


def up(x: Floats) -> Floats:
    """The next double above, for each element."""
    return np.nextafter(x, np.inf)


def sum_error(a: Floats, b: Floats, total: Floats) -> Floats:
    """(a + b) - total exactly, where total = fl(a + b) is finite (Knuth); not a number elsewhere."""
    part = total - a
    return (a - (total - part)) + (b - part)


def sum_below(a: Floats, b: Floats) -> Floats:
    """The largest double <= a + b."""
    total = a + b
    return np.where(sum_error(a, b, total) >= 0, total, down(total))


def sum_above(a: Floats, b: Floats) -> Floats:
    """The least double >= a + b."""
    total = a + b
    return np.where(sum_error(a, b, total) <= 0, total, up(total))


def function_below(y: Floats) -> Floats:
    """A number below the true value of which ``y`` is NumPy's."""
    return np.where(np.isposinf(y), LARGEST, y) - function_error(y)


def function_above(y: Floats) -> Floats:
    """A number above the true value of which ``y`` is NumPy's."""
    return np.where(np.isneginf(y), -LARGEST, y) + function_error(y)


def function_error(y: Floats) -> Floats:
    """At least FUNCTION_ULPS units in the last place of ``y``, and what adding it to ``y`` rounds off."""
    size = np.minimum(np.abs(y), LARGEST)
    return size * ((2 * FUNCTION_ULPS + 2) * UNIT) + 2 * FUNCTION_ULPS * SMALLEST


def enclosed(value: Fraction) -> tuple[float, float]:
    """The two neighbouring doubles around a rational number, equal where it is a double itself."""
    try:
        nearest = value.numerator / value.denominator
    except OverflowError:
        return (LARGEST, np.inf) if value > 0 else (-np.inf, -LARGEST)
    exact = Fraction(nearest)
    lower = nearest if exact <= value else float(np.nextafter(nearest, -np.inf))
    upper = nearest if exact >= value else float(np.nextafter(nearest, np.inf))
    return lower, upper


def monotone_power(magnitude: Floats, exponent: int, multiply: Callable[[Floats, Floats], Floats]) -> Floats:
    """magnitude^exponent for numbers >= 0 and exponent >= 1, by squaring, with a rounded product."""
    power: Floats | None = None
    square = magnitude
    while True:
        if exponent & 1:
            power = square if power is None else multiply(power, square)
        exponent >>= 1
        if not exponent:
            return magnitude if power is None else power
        square = multiply(square, square)


def product_below(a: Floats, b: Floats) -> Floats:
    """A number in [0, a b], for numbers >= 0."""
    return np.maximum(down(a * b), 0.0)


def product_above(a: Floats, b: Floats) -> Floats:
    """A number >= a b, for numbers >= 0; exactly 0 where a factor is."""
    return np.where((a == 0) | (b == 0), 0.0, up(a * b))
