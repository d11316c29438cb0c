"""The range of sine and cosine over intervals: ends, and extrema wherever one cannot be excluded.

Beyond FARTHEST_ANGLE nothing is excluded, and NumPy is not relied upon.
"""

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from service.problem.expressions.rounding import (
    FARTHEST_ANGLE,
    QUIETLY,
    UNIT,
    Floats,
    function_above,
    function_below,
)

TURN = 2 * np.pi


def sine(lower: Floats, upper: Floats) -> tuple[Floats, Floats]:
    """Outward ends of sin over [lower, upper]: lowest at three quarters of a turn, highest at one."""
    return _range(np.sin, lower, upper, 0.75, 0.25)


def cosine(lower: Floats, upper: Floats) -> tuple[Floats, Floats]:
    """Outward ends of cos over [lower, upper]: lowest at half a turn, highest at none."""
    return _range(np.cos, lower, upper, 0.5, 0.0)


@QUIETLY
def may_contain(lower: Floats, upper: Floats, offset: float, period: float) -> NDArray[np.bool_]:
    """Whether a point (offset + k) period, k an integer, may lie in [lower, upper]; ``False`` is proved.

    ``period`` stands for the multiple of pi that it is the nearest double to. Dividing by it errs by less
    than 3 units of roundoff relatively, subtracting the offset by one more; the slack is twice that.
    """
    far = np.maximum(np.abs(lower), np.abs(upper)) > FARTHEST_ANGLE
    first, last = lower / period, upper / period
    first = first - offset - 8 * UNIT * (np.abs(first) + 1)
    last = last - offset + 8 * UNIT * (np.abs(last) + 1)
    return np.asarray(far | (np.ceil(first) <= np.floor(last)))


@QUIETLY
def _range(
    function: Callable[[Floats], Floats], lower: Floats, upper: Floats, lowest: float, highest: float
) -> tuple[Floats, Floats]:
    left, right = function(lower), function(upper)
    below = np.maximum(function_below(np.minimum(left, right)), -1.0)
    above = np.minimum(function_above(np.maximum(left, right)), 1.0)
    return (
        np.where(may_contain(lower, upper, lowest, TURN), -1.0, below),
        np.where(may_contain(lower, upper, highest, TURN), 1.0, above),
    )
