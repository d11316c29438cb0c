"""The anytime loop: higher orders, then finer meshes, until the enclosure is as narrow as wanted."""

import math
import time
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from service.bounds.condensed import NotPositiveError
from service.bounds.enclosure import UNKNOWN, Enclosure
from service.bounds.flux import FluxSpace
from service.bounds.lehmann import goerisch_gram, lower_bounds, upper_bounds
from service.bounds.proof import reaches
from service.bounds.ritz import TrialSpace
from service.bounds.rounding import down, up
from service.bounds.separation import (
    CLEAR_GAP,
    LEAST_GAP,
    SMALL_GAP,
    Separation,
    counted_bound,
    gap_above,
    reachable,
    separate,
)
from service.elements.reference import MAX_ORDER
from service.errors import ComputationError
from service.forms.form import Pencil
from service.forms.modes import degree_of
from service.meshing.mesh import Mesh

Array = NDArray[np.float64]

LARGEST_ERROR = 0.1
"""Largest relative error of the forms, from the shapes of cells, with which anything is still concluded."""

FIRST_ORDER = 3
"""Order of the first look at the spectrum."""

LOOK_AHEAD = 24
"""How many eigenvalues beyond the wanted one are searched for a gap before counting alone must do."""

COUNT_SECONDS = 8e-5
"""Seconds that a search for a counted bound takes for each cell, for the lowest order; more only gives up earlier."""

NEAR = 0.2
"""Least distance of a shift from the first ratio, relative to it."""

FIRST_SIZE = 0.5
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
    """

    enclosure: Enclosure
    mesh: Mesh
    level: int
    order: int
    unknowns: int
    seconds: float


def sharpen(pencil: Pencil, index: int, cut: Separation, order: int, functions: Array, ratios: Array) -> Enclosure:
    """Enclosure of tau_index from trial functions of one order and fluxes of the same order."""
    used = max(cut.count, index)
    functions, ratios = functions[:, :, :used], ratios[:used]
    shift = positive_shift(pencil, float(ratios[index - 1]))
    shifted = pencil.shifted(shift)
    trial = TrialSpace(shifted, order)
    mass = trial.gram(pencil.weight, functions)
    energy = trial.gram(shifted.energy, functions)
    if functions.shape[2] < index:
        return UNKNOWN
    raised, lessened = shifted.energy.moved(1.0), pencil.weight.moved(-1.0)
    ritz = upper_bounds(trial.gram(raised, functions), trial.gram(lessened, functions))[index - 1] - shift
    above = Enclosure(-math.inf, up(ritz), upper_by=f"Ritz, order {order}")
    if not cut.count or functions.shape[2] < cut.count:
        return above
    error = shifted.ratio_error
    if error > LARGEST_ERROR:
        return above
    dual = goerisch_gram(trial, FluxSpace(shifted.energy, order), functions, ratios + shift)
    rho = down((cut.rho + shift) * (1 - error))
    below = down(lower_bounds(energy, mass, dual, rho)[index - 1] * (1 - error)) - shift
    return above.intersect(Enclosure(down(below), math.inf, lower_by=f"Lehmann-Goerisch, flux order {order}"))


def positive_shift(pencil: Pencil, ratio: float) -> float:
    """A power of two near the ratio: adding and removing it costs next to nothing.

    Large enough to make the potential of A + shift B positive on every cell, where B is a mass.
    """
    least = abs(ratio) + 1e-300
    density = pencil.weight.potential[:, 0]
    if np.all(density > 0):
        least = max(least, 2 * float(np.max(-pencil.energy.potential[:, 0] / density)))
    return float(2.0 ** round(math.log2(least) + (0.5 if least > abs(ratio) + 1e-300 else 0.0)))


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


@dataclass(frozen=True)
class Prospect:
    """A first look at the spectrum on a mesh: trial functions of low order, and where the spectrum is cut.

    shrink : the factor by which edges must shrink before minorants reach the wanted ratio; None when they do.
    """

    ratios: Array
    functions: Array
    cut: Separation
    shrink: float | None = None


def look(
    pencil: Pencil,
    pencil_on: Callable[[Mesh], Pencil],
    refined: Callable[[Mesh], Mesh],
    space: TrialSpace,
    index: int,
    cells: int,
) -> Prospect:
    """The cut of the spectrum, from more and more eigenvalues until a gap shows.

    cells : how many cells a mesh may have that is refined only for this.
    """
    ahead = 3
    while True:
        wanted = index + ahead
        ratios, functions = first_pairs(space, wanted)
        ritz = ratios[:wanted]
        sharp = can_sharpen(pencil)
        size, gap = gap_above(ritz, index) if sharp and len(ritz) > index else (0, 0.0)
        enough = CLEAR_GAP if ahead < LOOK_AHEAD // 2 else LEAST_GAP
        hopeless = ahead >= LOOK_AHEAD // 2 and gap < LEAST_GAP / 2
        if not sharp or gap >= enough or hopeless or ahead >= LOOK_AHEAD or len(ritz) < wanted:
            break
        ahead *= 2
    if LEAST_GAP / 2 <= gap < SMALL_GAP:
        ratios, functions = next_pairs(space, ratios, wanted, 0.1 * LEAST_GAP, functions)
        ritz = ratios[:wanted]
        size, gap = gap_above(ritz, index)
    useful = gap >= LEAST_GAP
    goal = float(ritz[size if useful else index - 1])
    # Fine cells just for the count pay where sharp bounds follow on the coarse ones.
    fine = reachable(pencil, pencil_on, refined, goal, cells if sharp else 0)
    if fine is None:
        return Prospect(ratios, functions, Separation(0, 0.0, 0.0, pencil), shrink_to(pencil, goal))
    if useful and fine is not pencil:
        # The coarse values may be far too high to say where the gap is.
        better, _ = first_pairs(TrialSpace(fine, 2), wanted)
        ritz = np.minimum(ritz, better[: len(ritz)])
        size, gap = gap_above(ritz, index)
        useful = gap >= LEAST_GAP
    cut = separate(fine, ritz, size) if useful else Separation(0, 0.0, 0.0, fine)
    return Prospect(ratios, functions, cut)


def can_sharpen(pencil: Pencil) -> bool:
    """Whether the Lehmann-Goerisch bound applies: constant coefficients per cell, B a mass, no facet terms."""
    return pencil.energy.steady and pencil.weight.steady and not np.any(pencil.weight.diffusion)


def first_pairs(space: TrialSpace, wanted: int) -> tuple[Array, Array]:
    """Rough smallest ratios, with a shift found by trial that makes the operator positive definite."""
    energy, weight = space.pencil.energy, space.pencil.weight
    stiff, density = np.linalg.norm(energy.diffusion[:, 0]), np.linalg.norm(weight.potential[:, 0])
    other = np.linalg.norm(weight.diffusion[:, 0])
    # Where B is no more than a boundary form, A is a norm and needs no shift.
    shift = float(stiff / (density or other)) if density or other else 0.0
    while True:
        try:
            return space.smallest(shift, wanted, 1e-4, rounds=4)
        except NotPositiveError:
            if shift == 0.0:
                raise
            shift *= 8


def next_pairs(space: TrialSpace, before: Array, wanted: int, tolerance: float, start: Array) -> tuple[Array, Array]:
    """The same ratios again, in a richer space or to more digits: iterated near the first one, where the spectrum is
    spread widest, if that leaves the operator positive definite."""
    first, last = float(before[0]), float(before[wanted - 1])
    try:
        return space.smallest(max(last - first, NEAR * abs(first)) - first, wanted, tolerance, start)
    except NotPositiveError:
        return space.smallest(max(abs(last), -2 * first), wanted, tolerance, start)


def shrink_to(pencil: Pencil, goal: float) -> float:
    """By how much edges must shrink before A - goal B has minorants; found by scaling potentials instead of edges."""
    form = pencil.at(goal)
    for halvings in range(1, 40):
        eased = replace(form, potential=form.potential * 0.25**halvings, facet=form.facet * 0.5**halvings)
        if reaches(eased):
            return float(0.9 * 0.5 ** (halvings - 0.5))
    return 0.5


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
    while True:
        begun = time.monotonic()
        try:
            mesh = mesh_at(size)
        except ComputationError:
            if known is UNKNOWN:
                raise
            return
        pencil = pencil_on(mesh)
        if len(mesh.cells) > GLANCE_CELLS:
            for found, unknowns in glance(pencil, index, budget):
                known = known.intersect(found)
                yield Step(known, mesh, level, 2, unknowns, time.monotonic() - begun)
            if known.width <= budget.width or not budget.affords(time.monotonic() - begun, 0):
                return
        order = FIRST_ORDER
        space = TrialSpace(pencil, order)
        prospect = look(pencil, pencil_on, refined, space, index, max(MINORANT_CELLS, 2 * len(mesh.cells)))
        cut, ratios, functions = prospect.cut, prospect.ratios, prospect.functions
        widths: list[float] = []
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
            following = None if prospect.shrink is not None else next_order(order, widths, budget.width)
            if following is None:
                break
            growth = (following / order) ** 3
            if not budget.affords(cost * growth, int(unknowns * growth)):
                return
            begun = time.monotonic()
            used = max(cut.count, index)
            space = TrialSpace(pencil, following)
            start = space.extend(functions[:, :, : used + 2], order)
            tolerance = 1e-2 * budget.width
            ratios, functions = next_pairs(space, ratios, used, tolerance, start)
            order = following
        level += 1
        shrink = 0.5 if prospect.shrink is None else min(0.5, prospect.shrink)
        size *= shrink
        if not budget.affords(cost, int(unknowns / shrink)):
            return


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
