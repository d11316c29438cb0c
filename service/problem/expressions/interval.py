"""Many intervals at once, and whether the expression they enclose exists on their boxes."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.problem.expressions.rounding import QUIETLY, Floats, sum_above

Flags = NDArray[np.bool_]


@dataclass(frozen=True)
class Interval:
    """Enclosures of an expression on boxes; the four arrays broadcast against each other.

    lower, upper : ends of what encloses every value that the expression has on the box; infinite where
        there is no bound.
    defined : proved: the expression has a value at every point of the box.
    undefined : proved: it has a value at no point of the box. Where neither is proved, smaller boxes
        may tell.
    """

    lower: Floats
    upper: Floats
    defined: Flags
    undefined: Flags

    @property
    def size(self) -> Floats:
        """The largest absolute value."""
        return np.maximum(np.abs(self.lower), np.abs(self.upper))

    @property
    @QUIETLY
    def middle(self) -> Floats:
        """A point of each interval, close to its middle; 0 where an end is infinite."""
        middle = self.lower / 2 + self.upper / 2
        inside = np.clip(middle, self.lower, self.upper)
        return np.where(np.isfinite(self.lower) & np.isfinite(self.upper), inside, 0.0)

    @QUIETLY
    def distance(self, point: Floats) -> Floats:
        """An upper bound of the distance from ``point`` to anything in the interval."""
        return np.maximum(sum_above(self.upper, -point), sum_above(point, -self.lower))

    def hull(self, other: "Interval") -> "Interval":
        """The smallest intervals that contain both; undefined only where both are."""
        return Interval(
            np.minimum(self.lower, other.lower),
            np.maximum(self.upper, other.upper),
            self.defined & other.defined,
            self.undefined & other.undefined,
        )

    def settled(self, shape: tuple[int, ...]) -> "Interval":
        """The same with arrays of one shape, and without bounds wherever a value is not proved to exist."""
        lower, upper = (np.array(np.broadcast_to(end, shape)) for end in (self.lower, self.upper))
        defined, undefined = (np.array(np.broadcast_to(has, shape)) for has in (self.defined, self.undefined))
        lower[~defined], upper[~defined] = -np.inf, np.inf
        return Interval(lower, upper, defined, undefined)

    def within(self, lower: Floats, upper: Floats) -> "Interval":
        """The same, cut to bounds that are known to hold as well."""
        return Interval(
            np.maximum(self.lower, lower), np.minimum(self.upper, upper), self.defined, self.undefined
        )


def point(value: Floats) -> Interval:
    """Intervals that hold one number each."""
    return between(value, value)


def between(lower: Floats, upper: Floats) -> Interval:
    """Intervals of a variable, which has a value everywhere."""
    shape = np.broadcast_shapes(np.shape(lower), np.shape(upper))
    return Interval(lower, upper, np.ones(shape, dtype=bool), np.zeros(shape, dtype=bool))
