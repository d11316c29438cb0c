"""A proved rough bound rho above the wanted eigenvalue and below the rest: what the sharp bounds start from."""

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.bounds.minorant import Minorant, ceiling
from service.forms.pencil import Pencil
from service.meshing.mesh import Mesh

Array = NDArray[np.float64]

CLEAR_GAP = 0.25
"""Relative gap above tau_m that is worth stopping at."""

LEAST_GAP = 0.003
"""Relative gap that still helps."""

MARGIN = 0.8
"""Share of the ceiling up to which a minorant is used: above, too little energy is left for its facet terms."""

HAIRS = (1e-6, 1e-4, 1e-3, 1e-2)
"""By what shares a candidate is lowered before it is certified: what the eigenvalue solver may have missed."""


@dataclass(frozen=True)
class Separation:
    """tau_(count + 1) >= rho is proved; count = 0 says that no useful gap was found.

    gap : relative distance of rho above the Ritz value tau_count.
    pencil : the pencil on the mesh that carried the proof.
    """

    count: int
    rho: float
    gap: float
    pencil: Pencil


def reachable(
    pencil: Pencil,
    pencil_on: Callable[[Mesh], Pencil],
    refined: Callable[[Mesh], Mesh],
    value: float,
    cells: int,
) -> Pencil | None:
    """The pencil on the mesh, refined uniformly until minorants exist up to ``value``; None if that takes too many cells."""
    while MARGIN * ceiling(pencil) < value:
        if 4 * len(pencil.mesh.cells) > cells:
            return None
        pencil = pencil_on(refined(pencil.mesh))
    return pencil


def separate(pencil: Pencil, ritz: Array, index: int) -> Separation:
    """Chooses where to cut the spectrum above the ratio ``index`` and proves the cut.

    Parameters
    ----------
    pencil : on a mesh fine enough for minorants a little above ritz[index].
    ritz : upper bounds of the smallest ratios, ascending, the last ones only a look ahead.
    index : number of the wanted ratio, from 1.
    """
    best = Separation(0, 0.0, 0.0, pencil)
    limit = MARGIN * ceiling(pencil)
    trial = min(1.3 * float(ritz[-1]), max(limit / 2, min(limit, 1.3 * float(ritz[index]))))
    for order in (1, 2, 3) if len(pencil.mesh.cells) > 1500 else (2, 3, 4):
        minorant = Minorant(pencil, order, trial)
        bounds = minorant.candidates(len(ritz))
        gaps = (bounds[index:] - ritz[index - 1 : -1]) / bounds[index:]
        clear = np.flatnonzero(gaps >= CLEAR_GAP)
        pick = int(clear[0]) if len(clear) else int(np.argmax(gaps))
        if gaps[pick] > max(LEAST_GAP, 1.2 * best.gap):
            count = index + pick
            rho = certify_below(minorant, float(bounds[count]), count)
            if rho is not None:
                rho *= 1 - pencil.ratio_error
                gap = (rho - float(ritz[count - 1])) / rho
                best = Separation(count, rho, gap, pencil)
        if best.gap >= 0.4 * CLEAR_GAP:
            break
    return best


def certify_below(minorant: Minorant, candidate: float, count: int) -> float | None:
    """The proof for the candidate lowered by the first share that succeeds."""
    proofs = (minorant.certify(candidate * (1 - hair), count) for hair in HAIRS)
    return next((proof for proof in proofs if proof is not None), None)


def counted_bound(pencil: Pencil, estimate: float, index: int, order: int, width: float) -> float:
    """A proved lower bound of tau_index by counting alone, -inf where there is none.

    Bisects the distance below the upper bound ``estimate``, on a logarithmic scale from ``width`` / 100.
    """
    minorant = Minorant(pencil, order, min(1.01 * estimate, MARGIN * ceiling(pencil)))
    low, high = math.log(width / 100), 0.0

    def value(distance: float) -> float:
        return min(estimate * (1 - 0.999 * math.exp(distance)), minorant.trial)

    for _ in range(10):
        middle = (low + high) / 2
        if minorant.count(value(middle)) < index:
            high = middle
        else:
            low = middle
    proved = minorant.certify(value(high), index - 1)
    return -math.inf if proved is None else proved * (1 - pencil.ratio_error)
