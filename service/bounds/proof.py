"""How many negative directions a quadratic form has: counted from its minorant's matrix, and proved."""

from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from service.bounds.inertia import SingularPivotError, factorise, negatives, smallest_eigenvalue_bound
from service.bounds.minorant import Minorant, TooCoarseError
from service.forms.form import Form, Pencil

LARGEST_NEED = 0.45
"""What negative potentials may take of the error's energy: beyond, cells' own blocks are hardly positive definite."""

LARGEST_RESERVE = 0.3
"""The largest share of a positive form that may be set aside to pay for rounding."""


def reaches(form: Form, need: float = LARGEST_NEED) -> bool:
    """Whether the cells are small enough for a minorant of the form that is good for something."""
    try:
        return Minorant(form, 1).shares().need <= need
    except TooCoarseError:
        return False


def count(form: Form, order: int) -> int | None:
    """Negative eigenvalues of N as computed, unproved; None where the mesh is too coarse or a pivot vanishes."""
    if not np.isfinite(form.uncertainty):
        return None
    try:
        condensed = Minorant(form, order).condensed(bounded=False)
        return None if condensed is None else negatives(condensed[0])
    except (TooCoarseError, SingularPivotError):
        return None


def scale_of(pencil: Pencil, value: float) -> float:
    """A potential of the size of what is counted, for the form that pays for rounding."""
    stiff = float(np.mean(np.trace(pencil.energy.diffusion[:, 0], axis1=1, axis2=2)))
    return max(stiff, abs(value) * float(np.mean(pencil.weight.potential[:, 0])))


@dataclass(frozen=True)
class Prover:
    """Proves how few ratios of a pencil lie below a number, for every true pencil that the arrays may stand for.

    Q = (Q - h P) + h P with P[u] = int G grad u . grad u + scale int u^2 and a small h: N[Q - h P] + h N[P] is a
    minorant of Q too. The facet matrix of P is proved to be >= g I, and that of Q - h P is factorised up to an error E:
    |E| <= h g makes the count of the factors a proof (Sylvester, Weyl).

    reference : G is that of the pencil at this number, the largest that is asked for.
    """

    pencil: Pencil
    order: int
    reference: float

    @cached_property
    def positive(self) -> Form:
        """P."""
        form = self.pencil.at(self.reference).moved(-1.0)
        potential = np.full((len(form.potential), 1), scale_of(self.pencil, self.reference))
        return replace(form, potential=potential, facet=np.zeros((len(form.facet), 1)))

    @cached_property
    def ground(self) -> tuple[float, float]:
        """g, and the allowance of the facet matrix of P; g = 0 where nothing is proved."""
        if self.pencil.at(self.reference).uncertainty > LARGEST_RESERVE:
            return 0.0, 0.0
        try:
            above = Minorant(self.positive, self.order).condensed()
            if above is None:
                return 0.0, 0.0
            return max(0.0, smallest_eigenvalue_bound(above[0]) - above[1]), above[1]
        except (TooCoarseError, SingularPivotError):
            return 0.0, 0.0

    def proves(self, t: float, most: int) -> bool:
        """Whether at most ``most`` ratios are proved to lie below t."""
        form = self.pencil.at(t)
        if form.uncertainty > LARGEST_RESERVE:
            return False
        form = form.moved(-1.0)
        ground, allowance = self.ground
        reserve = 4 * allowance / ground if ground > 0 else 1.0
        try:
            # A first guess of what rounding takes, then what it took.
            for _ in range(2):
                if reserve > LARGEST_RESERVE:
                    return False
                below = Minorant(form.plus(self.positive, -reserve), self.order).condensed()
                if below is None:
                    return False
                factors = factorise(below[0])
                taken = factors.residual + below[1]
                if factors.negative <= most and taken <= 0.99 * reserve * ground:
                    return True
                needed = 1.5 * taken / ground
                if factors.negative > most and needed > 0.5 * reserve:
                    return False
                reserve = needed
        except (TooCoarseError, SingularPivotError):
            return False
        return False
