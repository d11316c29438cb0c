"""The anytime loop: higher orders, then finer meshes, until the enclosure is as narrow as wanted."""

import math
import time
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from service.bounds.enclosure import UNKNOWN, Enclosure
from service.bounds.proof import reaches
from service.bounds.prospect import first_pairs, look, next_pairs
from service.bounds.ritz import TrialSpace
from service.bounds.separation import Separation, counted_bound
from service.bounds.sharpen import sharpen
from service.elements.reference import MAX_ORDER
from service.errors import ComputationError
from service.forms.form import Pencil
from service.forms.modes import degree_of
from service.meshing.mesh import Mesh

FIRST_ORDER = 3
"""Order of the first look at the spectrum."""

COUNT_SECONDS = 8e-5
"""Seconds that a search for a counted bound takes for each cell, for the lowest order; more only gives up earlier."""

FIRST_SIZE = 0.33
"""Longest edges of the first mesh, in mesh units (the diameter is between 1 and 2)."""

GLANCE_CELLS = 3000
"""Cells from which a mesh is first looked at with the lowest orders, to have something early."""

MINORANT_CELLS = 6000
"""Cells up to which a mesh is refined just to cut the spectrum."""


@dataclass(frozen=True)
class Budget:
    """Bounds of one loop: relative width of tau wanted, a point on the monotonic clock, unknowns.

    found : what is proved already of other constants of the problem, by their ids.
    """

    width: float
    deadline: float
    unknowns: int
    found: Mapping[str, Enclosure] = field(default_factory=dict)

    def affords(self, seconds: float, unknowns: int) -> bool:
        """Whether a step of so many seconds and unknowns still fits."""
        return time.monotonic() + seconds <= self.deadline and unknowns <= self.unknowns


@dataclass(frozen=True)
class Step:
    """What is known after one more step.

    enclosure : of tau_index in mesh units, never wider than before.
    unknowns : of the conforming space and the flux space together.
    more : what the result shows beside the enclosure.
    """

    enclosure: Enclosure
    mesh: Mesh
    level: int
    order: int
    unknowns: int
    seconds: float
    more: Mapping[str, Any] = field(default_factory=dict)


def glance(pencil: Pencil, index: int, budget: Budget) -> Iterator[tuple[Enclosure, int]]:
    """What the lowest orders prove on a mesh, and with how many unknowns: above first, then below."""
    space = TrialSpace(pencil, 2)
    ratios, functions = first_pairs(space, index)
    uncut = Separation(0, 0.0, 0.0, pencil)
    above = sharpen(pencil, index, uncut, 2, functions, ratios)
    unknowns = space.numbering.size
    yield above, unknowns
    if math.isfinite(above.upper) and reaches(pencil.at(above.upper)):
        yield count_below(pencil, above, index, 2, budget), unknowns


def enclose(
    mesh_at: Callable[[float], Mesh],
    refined: Callable[[Mesh], Mesh],
    pencil_on: Callable[[Mesh], Pencil],
    index: int,
    budget: Budget,
) -> Iterator[Step]:
    """Ever narrower enclosures of the index-th ratio of a pencil, A >= 0.

    Parameters
    ----------
    mesh_at : mesh with edges of at most a given length in mesh units.
    refined : uniform refinement of a mesh.
    pencil_on : the pencil on a mesh.
    index : number of the ratio, from 1.
    budget : when to stop.
    """
    known = UNKNOWN
    size = FIRST_SIZE
    level = 0
    # Seconds for each cell that the first steps took on the mesh before.
    pace = 0.0
    while True:
        begun = time.monotonic()
        try:
            mesh = mesh_at(size)
        except ComputationError:
            if known is UNKNOWN:
                raise
            return
        if not budget.affords(pace * len(mesh.cells), 0):
            return
        pencil = pencil_on(mesh)
        if len(mesh.cells) > GLANCE_CELLS:
            for found, unknowns in glance(pencil, index, budget):
                known = known.intersect(found)
                cost = time.monotonic() - begun
                pace = cost / len(mesh.cells)
                yield Step(known, mesh, level, 2, unknowns, cost)
            if known.width <= budget.width or not budget.affords(3 * cost, 0):
                return
        order = FIRST_ORDER
        space = TrialSpace(pencil, order)
        prospect = look(pencil, pencil_on, refined, space, index, max(MINORANT_CELLS, 2 * len(mesh.cells)))
        cut, ratios, functions = prospect.cut, prospect.ratios, prospect.functions
        widths: list[float] = []
        looked = time.monotonic()
        while True:
            found = sharpen(pencil, index, cut, order, functions, ratios)
            # Trial functions of low order may be too poor for a cut that is proved: count only to have something.
            counting = not cut.count or not math.isfinite(known.lower)
            if counting and not math.isfinite(found.lower):
                found = found.intersect(count_below(cut.pencil, known.intersect(found), index, order, budget))
            known = known.intersect(found)
            widths.append(found.width)
            cost = time.monotonic() - begun
            unknowns = space.numbering.size + len(mesh.facets) * (order + 1)
            yield Step(known, mesh, level, order, unknowns, cost)
            if known.width <= budget.width:
                return
            if order == FIRST_ORDER and len(mesh.cells) <= GLANCE_CELLS:
                pace = cost / len(mesh.cells)
            following = None if prospect.shrink is not None else next_order(order, widths, budget.width)
            if following is None:
                break
            growth = (following / order) ** 3
            # The first step's look at the spectrum is not taken again: its functions are where the next ones start.
            ahead = min(cost, 2 * (time.monotonic() - looked)) * growth
            if not budget.affords(ahead, int(1.1 * unknowns * (following / order) ** 2)):
                return
            begun = looked = time.monotonic()
            used = max(cut.count, index)
            space = TrialSpace(pencil, following)
            start = space.extend(functions[:, :, : used + 2], order)
            tolerance = 1e-2 * budget.width
            ratios, functions = next_pairs(space, ratios, used, tolerance, start)
            order = following
        level += 1
        # No leaps: what coarser meshes prove on the way costs little beside the last one.
        shrink = 0.5 if prospect.shrink is None else min(0.5, max(prospect.shrink, 0.25))
        size *= shrink
        if not budget.affords(pace * (len(mesh.cells) + equilaterals(mesh, size)), int(unknowns / shrink)):
            return


def equilaterals(mesh: Mesh, size: float) -> float:
    """How many equilateral triangles of a size the mesh's area takes; about what a mesh of that size has at least."""
    return float(np.sum(mesh.jacobian)) / 2 / (math.sqrt(3) / 4 * size**2)


def count_below(pencil: Pencil, known: Enclosure, index: int, order: int, budget: Budget) -> Enclosure:
    """What counting alone proves, where no gap in the spectrum lets the sharp bounds work."""
    # What R of the minorant is good for falls by the degree of the coefficients.
    degree = degree_of(pencil.mesh.dimension, pencil.energy.diffusion.shape[1])
    rank = min(order - 1 + degree, 5)
    seconds = budget.deadline - time.monotonic()
    while len(pencil.mesh.cells) * COUNT_SECONDS * (rank + 1) ** 2 > seconds:
        rank -= 1
        if rank <= degree:
            return UNKNOWN
    bound = counted_bound(pencil, known.upper, index, rank, budget.width, known.lower, budget.deadline)
    by = f"nonconforming minorant of order {rank}, inertia count"
    return Enclosure(bound, math.inf, lower_by=by)


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
