"""The anytime loop: higher orders, then finer meshes, until the enclosure is as narrow as wanted."""

import math
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.bounds.enclosure import UNKNOWN, Enclosure
from service.bounds.flux import FluxSpace
from service.bounds.lehmann import goerisch_gram, lower_bounds, upper_bounds
from service.bounds.ritz import TrialSpace
from service.bounds.rounding import down, up
from service.bounds.separation import Separation, separate
from service.elements.reference import MAX_ORDER
from service.forms.pencil import Pencil
from service.meshing.mesh import Mesh

Array = NDArray[np.float64]

FIRST_ORDER = 3
"""Order of the first look at the spectrum."""


@dataclass(frozen=True)
class Budget:
    """Bounds of one loop: relative width of tau wanted, a point on the monotonic clock, unknowns."""

    width: float
    deadline: float
    unknowns: int

    def affords(self, seconds: float, unknowns: int) -> bool:
        """Whether a step of so many seconds and unknowns still fits."""
        return time.monotonic() + seconds <= self.deadline and unknowns <= self.unknowns


@dataclass(frozen=True)
class Step:
    """What is known after one more step.

    enclosure : of tau_index in mesh units, never wider than before.
    unknowns : of the conforming space and the flux space together.
    """

    enclosure: Enclosure
    mesh: Mesh
    level: int
    order: int
    unknowns: int
    seconds: float


def sharpen(
    pencil: Pencil, index: int, cut: Separation, order: int, functions: Array, ratios: Array
) -> Enclosure:
    """Enclosure of tau_index from trial functions of one order and fluxes of the same order."""
    used = max(cut.count, index)
    functions, ratios = functions[:, :, :used], ratios[:used]
    # A power of two near the wanted ratio: adding and removing it costs next to nothing.
    shift = 2.0 ** round(math.log2(max(float(ratios[index - 1]), 1e-300)))
    shifted = pencil.shifted(shift)
    trial = TrialSpace(shifted, order)
    mass = trial.mass_gram(functions, shifted.weight)
    energy = trial.gradient_gram(functions) + trial.mass_gram(functions, shifted.potential)
    error = pencil.coefficient_error
    ritz = upper_bounds(energy, mass)[index - 1] - shift
    above = Enclosure(-math.inf, up(ritz * (1 + error), 4), upper_by=f"Ritz, order {order}")
    if not cut.count:
        return above
    flux = FluxSpace(shifted, order)
    dual = goerisch_gram(trial, flux, functions, ratios + shift)
    rho = (cut.rho * (1 - pencil.coefficient_error) + shift) * (1 - 1e-15)
    below = lower_bounds(energy, mass, dual, rho)[index - 1] - shift
    lower = down(below * (1 - error), 4) if below > 0 else -math.inf
    return above.intersect(Enclosure(lower, math.inf, lower_by=f"Lehmann-Goerisch, flux order {order}"))


def enclose(
    mesh_at: Callable[[int], Mesh],
    refined: Callable[[Mesh], Mesh],
    pencil_on: Callable[[Mesh], Pencil],
    index: int,
    budget: Budget,
) -> Iterator[Step]:
    """Ever narrower enclosures of the index-th ratio of a pencil, A >= 0.

    Parameters
    ----------
    mesh_at : mesh of a level 0, 1, 2, ..., each finer than the one before.
    refined : uniform refinement of a mesh.
    pencil_on : the pencil on a mesh.
    index : number of the ratio, from 1.
    budget : when to stop.
    """
    known = UNKNOWN
    level = 0
    cost = 0.0
    while True:
        begun = time.monotonic()
        mesh = mesh_at(level)
        pencil = pencil_on(mesh)
        space = TrialSpace(pencil, FIRST_ORDER)
        ratios, functions, cut = look(pencil, pencil_on, mesh, refined, space, index)
        minorant = Enclosure(cut.lower, math.inf, lower_by="nonconforming minorant, inertia count")
        known = known.intersect(minorant)
        order = FIRST_ORDER
        widths: list[float] = []
        while True:
            step = sharpen(pencil, index, cut, order, functions, ratios)
            known = known.intersect(step)
            widths.append(step.width)
            flux_unknowns = len(mesh.facets) * (order + 1)
            now = time.monotonic()
            cost = now - begun
            yield Step(known, mesh, level, order, space.numbering.size + flux_unknowns, cost)
            if known.width <= budget.width:
                return
            following = next_order(order, widths, budget.width)
            if following is None:
                break
            growth = (following / order) ** 3
            if not budget.affords(cost * growth, int(space.numbering.size * growth)):
                return
            begun = time.monotonic()
            space = TrialSpace(pencil, following)
            used = max(cut.count, index)
            start = space.extend(functions[:, :, : used + 2], order)
            ratios, functions = space.smallest(float(ratios[index - 1]), used, start)
            order = following
        level += 1
        if not budget.affords(3 * cost, 4 * space.numbering.size):
            return


def next_order(order: int, widths: list[float], target: float) -> int | None:
    """The next order worth a try on the same mesh; None when a finer mesh serves better."""
    if order >= MAX_ORDER:
        return None
    if len(widths) < 2 or not math.isfinite(widths[-2]):
        return order + 1
    if widths[-1] > 0.7 * widths[-2]:
        return None
    rate = math.log(widths[-2] / max(widths[-1], 1e-16))
    missing = math.log(max(widths[-1] / target, 1.0))
    return min(order + (2 if missing > 1.5 * rate else 1), MAX_ORDER)


def look(
    pencil: Pencil,
    pencil_on: Callable[[Mesh], Pencil],
    mesh: Mesh,
    refined: Callable[[Mesh], Mesh],
    space: TrialSpace,
    index: int,
) -> tuple[Array, Array, Separation]:
    """A first look at the spectrum and the cut: more and more eigenvalues until a gap shows."""
    ahead = 4
    while True:
        wanted = index + ahead
        ratios, functions = space.smallest(1.0, wanted)
        ritz = ratios[:wanted]
        cut = separate(pencil_on, mesh, refined, ritz, index, max(8000, 4 * len(mesh.cells)))
        if cut.gap > 0.02 or ahead >= 32 or len(ritz) < wanted:
            return ratios, functions, cut
        ahead *= 2
