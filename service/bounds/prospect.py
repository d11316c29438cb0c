"""A first look at the spectrum of a pencil on a mesh: rough ratios, and where they can be cut."""

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from service.bounds.condensed import NotPositiveError
from service.bounds.proof import reaches
from service.bounds.ritz import TrialSpace
from service.bounds.separation import CLEAR_GAP, LEAST_GAP, SMALL_GAP, Separation, gap_above, reachable, separate
from service.bounds.sharpen import can_sharpen
from service.forms.form import Pencil
from service.meshing.mesh import Mesh

Array = NDArray[np.float64]

LOOK_AHEAD = 24
"""How many eigenvalues beyond the wanted one are searched for a gap before counting alone must do."""

NEAR = 0.2
"""Least distance of a shift from the first ratio, relative to it."""


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
    if useful and reaches(pencil.at(goal), need=1.0):
        # Worth a try on cells that are nearly too large: most gaps are proved there, at a fraction of the cost.
        cut = separate(pencil, ritz, size, orders=1)
        if cut.count:
            return Prospect(ratios, functions, cut)
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


def first_pairs(space: TrialSpace, wanted: int) -> tuple[Array, Array]:
    """Rough smallest ratios, with a shift found by trial that makes the operator positive definite."""
    shift = shift_of(space)
    while True:
        try:
            return space.smallest(shift, wanted, 1e-4, rounds=4)
        except NotPositiveError:
            if shift == 0.0:
                raise
            shift *= 8


def shift_of(space: TrialSpace) -> float:
    """A shift of the size of the stiffest functions' ratios; none where B is a boundary form, for A is a norm then."""
    energy, weight = space.pencil.energy, space.pencil.weight
    stiff, density = np.linalg.norm(energy.diffusion[:, 0]), np.linalg.norm(weight.potential[:, 0])
    other = np.linalg.norm(weight.diffusion[:, 0])
    return float(stiff / (density or other)) if density or other else 0.0


def next_pairs(space: TrialSpace, before: Array, wanted: int, tolerance: float, start: Array) -> tuple[Array, Array]:
    """The same ratios again, in a richer space or to more digits: iterated near the first one, where the spectrum is
    spread widest, if that leaves the operator positive definite."""
    first, last = float(before[0]), float(before[min(wanted, len(before)) - 1])
    for shift in (max(last - first, NEAR * abs(first)) - first, max(abs(last), -2 * first)):
        try:
            return space.smallest(shift, wanted, tolerance, start)
        except NotPositiveError:
            continue
    # Where the first ratio is zero, say.
    return space.smallest(shift_of(space), wanted, tolerance, start)


def shrink_to(pencil: Pencil, goal: float) -> float:
    """By how much edges must shrink before A - goal B has minorants; found by scaling potentials instead of edges."""
    form = pencil.at(goal)
    for halvings in range(1, 40):
        eased = replace(form, potential=form.potential * 0.25**halvings, facet=form.facet * 0.5**halvings)
        if reaches(eased):
            return float(0.9 * 0.5 ** (halvings - 0.5))
    return 0.5
