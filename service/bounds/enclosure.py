"""An enclosure: two proved bounds of one number."""

import math
from dataclasses import dataclass

from service.bounds.rounding import down, up


@dataclass(frozen=True)
class Enclosure:
    """lower <= true value <= upper, both proved; the methods that gave them, in words."""

    lower: float
    upper: float
    lower_by: str = ""
    upper_by: str = ""

    @property
    def width(self) -> float:
        """upper - lower relative to the larger size of both (upper, where positive); infinite with a side missing."""
        size = max(abs(self.lower), abs(self.upper))
        if not math.isfinite(size):
            return math.inf
        return max(0.0, up(self.upper - self.lower) / size) if size > 0 else 0.0

    def intersect(self, other: "Enclosure") -> "Enclosure":
        """The better of both sides: never wider than either.

        Raises
        ------
        ArithmeticError
            If the two contradict one another, which no pair of proved enclosures can.
        """
        low = self if self.lower >= other.lower else other
        high = self if self.upper <= other.upper else other
        if low.lower > high.upper:
            raise ArithmeticError(f"enclosures contradict: {self} and {other}")
        return Enclosure(low.lower, high.upper, low.lower_by, high.upper_by)

    def inverse_root(self, factor: float = 1.0) -> "Enclosure":
        """Enclosure of factor tau^(-1/2) from one of tau > 0; sides swap, rounding outward.

        ``factor`` must be exact (a power of two).
        """
        lower = down(factor / math.sqrt(self.upper)) if math.isfinite(self.upper) else 0.0
        upper = up(factor / math.sqrt(self.lower)) if self.lower > 0 else math.inf
        return Enclosure(lower, upper, self.upper_by, self.lower_by)


UNKNOWN = Enclosure(-math.inf, math.inf)
