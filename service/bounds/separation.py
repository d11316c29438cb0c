"""A proved rough bound rho above the wanted eigenvalue and below the rest: what the sharp bounds start from."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.bounds.minorant import Minorant
from service.forms.pencil import Pencil
from service.meshing.mesh import Mesh

Array = NDArray[np.float64]

CLEAR_GAP = 0.25
"""Relative gap above tau_m that is worth stopping at."""

LEAST_GAP = 0.003
"""Relative gap that still helps."""


@dataclass(frozen=True)
class Separation:
    """tau_(count + 1) >= rho is proved; ``lower`` <= tau_index is proved as well.

    gap : relative distance of rho above the Ritz value tau_count.
    """

    count: int
    rho: float
    gap: float
    lower: float


def separate(
    pencil_on: Callable[[Mesh], Pencil],
    mesh: Mesh,
    refined: Callable[[Mesh], Mesh],
    ritz: Array,
    index: int,
    cells: int,
) -> Separation:
    """Chooses where to cut the spectrum and proves the cut, refining the mesh as far as the cut needs.

    Parameters
    ----------
    pencil_on, mesh, refined : the pencil on any mesh, a mesh, and its uniform refinement.
    ritz : upper bounds of the smallest ratios, ascending, the last ones only a look ahead.
    index : number of the wanted ratio, from 1.
    cells : largest number of cells to go to.

    Returns
    -------
    Separation
        ``count`` = 0 when no gap could be proved; ``lower`` may be -inf.
    """
    best = Separation(0, 0.0, 0.0, -np.inf)
    while True:
        pencil = pencil_on(mesh)
        minorant = Minorant(pencil)
        trial = min(1.3 * float(ritz[-1]), 0.5 * minorant.ceiling)
        bounds = minorant.candidates(trial, len(ritz))
        gaps = (bounds[index:] - ritz[index - 1 : -1]) / bounds[index:]
        clear = np.flatnonzero(gaps >= CLEAR_GAP)
        pick = int(clear[0]) if len(clear) else int(np.argmax(gaps))
        if gaps[pick] > max(LEAST_GAP, best.gap):
            count = index + pick
            rho = minorant.certify(float(bounds[count]) * (1 - 1e-10), count)
            if rho is not None:
                rho *= 1 - 2 * pencil.coefficient_error
                gap = (rho - ritz[count - 1]) / rho
                best = Separation(count, rho, float(gap), -np.inf)
        enough = best.gap >= CLEAR_GAP or (best.gap >= 0.4 * CLEAR_GAP and len(mesh.cells) > 2000)
        if enough or 4 * len(mesh.cells) > cells:
            own = minorant.certify(float(bounds[index - 1]) * (1 - 1e-10), index - 1)
            lower = -np.inf if own is None else own * (1 - pencil.coefficient_error)
            return Separation(best.count, best.rho, best.gap, lower)
        mesh = refined(mesh)
