"""Proofs that an expression takes values in a range everywhere on a set, by intervals on smaller and smaller boxes."""

from dataclasses import dataclass, field

import numpy as np

from service.problem.coefficients import LARGEST_VALUE
from service.problem.covers import Boxes, Cover
from service.problem.expressions.expression import Expression
from service.problem.expressions.interval import Interval
from service.problem.expressions.nodes import ordered
from service.problem.expressions.readings import enclosures, taylor_models, values
from service.problem.expressions.rounding import Floats
from service.problem.expressions.taylor_model import TaylorModel, range_bounds
from service.problem.positions import Points
from service.problem.segments import Mask

MOST_LEVELS = 32
"""How often boxes are halved in the search for a proof or a counterexample."""

MOST_BOXES = 4000
"""Most undecided boxes of one size; where there are more, no proof is found."""

MOST_EFFORT = 10_000_000
"""Most boxes, times the pieces of the expressions on them, that are looked at for one request (a few seconds)."""

OVERHEAD = 200
"""What it costs to look at any number of boxes at once, in boxes."""

DEGREES = ((256, 8), (MOST_BOXES, 3))
"""Up to this many boxes, polynomials of this degree are tried where plain intervals do not decide."""


@dataclass(frozen=True)
class Claim:
    """That an expression has a value at every point of a set, and no value outside a range.

    largest : bound of the absolute value.
    positive : whether the value must be positive.
    """

    expression: Expression
    largest: float = LARGEST_VALUE
    positive: bool = False

    def proved(self, found: Interval) -> Mask:
        """On which boxes the claim follows from enclosures."""
        fine = found.defined & (found.lower >= -self.largest) & (found.upper <= self.largest)
        result: Mask = fine & (found.lower > 0) if self.positive else fine
        return result

    def violated(self, found: Floats) -> Mask:
        """Which values at points, in floating-point arithmetic, are not in the range."""
        outside = ~(np.abs(found) <= self.largest)
        return outside | ~(found > 0) if self.positive else outside


@dataclass(frozen=True)
class Failure:
    """Why a claim is not proved.

    point : in the user's length unit, in the set.
    certain : whether the claim fails there; otherwise no proof was found near it.
    """

    point: Points
    certain: bool


@dataclass
class Effort:
    """What may still be spent on the proofs of one request."""

    left: int = MOST_EFFORT


@dataclass(frozen=True)
class Prover:
    """Looks for proofs on sets given in units of 2**exponent of the user's length unit."""

    exponent: int
    effort: Effort = field(default_factory=Effort)

    def failure(self, claim: Claim, cover: Cover) -> Failure | None:
        """Where a claim fails or cannot be proved, ``None`` if it holds everywhere on the set."""
        found = self._violation(claim, cover.samples())
        if found is not None:
            return found
        size = len(ordered(claim.expression.root))
        boxes = cover.start()
        for _ in range(MOST_LEVELS):
            if boxes.count == 0:
                return None
            self.effort.left -= (boxes.count + OVERHEAD) * size
            boxes, found = self._undecided(claim, cover, boxes)
            if found is not None:
                return found
            if 4 * boxes.count > MOST_BOXES or self.effort.left < 0:
                boxes = boxes.chosen(cover.witnesses(boxes)[0])
                if 4 * boxes.count > MOST_BOXES or self.effort.left < 0:
                    break
            boxes = cover.refined(boxes)
        _, points = cover.witnesses(boxes)
        return Failure(self._unscaled(points[0]), False) if len(points) else None

    def _undecided(self, claim: Claim, cover: Cover, boxes: Boxes) -> tuple[Boxes, Failure | None]:
        """The boxes on which nothing is decided, or a point at which the claim fails."""
        first, second = self._unscaled(boxes.first), self._unscaled(boxes.second)
        low, high = np.minimum(first, second), np.maximum(first, second)
        found = enclosures(claim.expression, low, high)
        open_ones = np.flatnonzero(~claim.proved(found))
        open_ones = open_ones[cover.near(boxes.chosen(open_ones))]
        if len(open_ones) == 0:
            return boxes.chosen(open_ones), None
        sharper = range_bounds(_models(claim.expression, low[:, open_ones], high[:, open_ones]))
        rest = boxes.chosen(open_ones[~claim.proved(sharper)])
        return rest, self._violation(claim, cover.probes(rest))

    def _violation(self, claim: Claim, points: Points) -> Failure | None:
        """The first of some points at which the claim fails in floating-point arithmetic."""
        where = self._unscaled(points)
        bad = np.flatnonzero(claim.violated(values(claim.expression, where.T)))
        return Failure(where[bad[0]], True) if len(bad) else None

    def _unscaled(self, points: Points) -> Points:
        return np.ldexp(points, self.exponent)


def _models(expression: Expression, low: Floats, high: Floats) -> TaylorModel:
    """Taylor models on boxes."""
    centre = low / 2 + high / 2
    half = np.nextafter(np.maximum(high - centre, centre - low), np.inf)
    degree = next(degree for most, degree in DEGREES if low.shape[1] <= most)
    return taylor_models(expression, centre, half, degree)
