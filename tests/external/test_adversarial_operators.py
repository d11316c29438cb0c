"""Enclosures of hard random operators against another finite element library; its ratios are upper bounds."""

import json
import math
from collections.abc import Callable
from itertools import pairwise

import numpy as np
import pytest
from conforming import PENCILS, nested, references
from operator_runs import WHOLE, Interval, Key, ask_problem, intervals
from random_operators import Case, case

from service.meshing.generate import mesh_domain
from service.problem.request import read_request

COUNT, BLOCK = 500, 25

TOLERANCE = 0.05

SECONDS = 8.0

ROUNDING = 1e-8
"""Relative to the sum of the absolute values of all terms; rounding and quadrature of the other library."""

CONVERGED = 1e-4
"""Relative change from one space to the next at which a reference counts as converged where solutions are smooth."""

MISSED = 1e-3
"""Relative; how far a converged reference may be above the smallest ratio."""

LARGEST_CONTRAST = 10.0
"""Of the diffusion, up to which solutions count as smooth: singular exponents at corners of regions go to zero."""

NEVER_REACHED = 0.99
"""Finite elements say nothing of ratios near or above this share of those of oscillating functions."""


def inverse_square(found: Interval) -> Interval:
    """The ratio whose inverse root is enclosed."""
    return found[1] ** -2, found[0] ** -2 if found[0] > 0 else math.inf


RATIOS: dict[str, Callable[[Interval], Interval]] = {
    "coercivity": lambda found: found,
    "decay_rate": lambda found: found,
    "trace": inverse_square,
}
"""The ratio of each constant, from the constant."""


BILINEAR = ("inf_sup", "continuity")
"""Constants that are no ratio of forms."""


def disorder(enclosures: dict[Key, Interval]) -> list[str]:
    """Where alpha <= beta <= gamma is contradicted."""
    ordered = [(name, enclosures[name, ""]) for name in ("coercivity", *BILINEAR) if (name, "") in enclosures]
    return [
        f"{low}: the lower bound {first[0]} lies above the upper bound {second[1]} of {high}"
        for (low, first), (high, second) in pairwise(ordered)
        if first[0] > second[1]
    ]


def contrast(problem: Case) -> float:
    """Largest ratio of the diffusion's first entry between regions, at one point."""
    sizes = [float(values[0].at(np.array(0.0), np.array(0.0))) for _, values in problem.diffusion.entries]
    return max(sizes) / min(sizes)


def faults(problem: Case) -> list[str]:
    """What is wrong with the enclosures of one problem."""
    document = problem.document()
    result = ask_problem(document, (*RATIOS, *BILINEAR), TOLERANCE, SECONDS).result
    domain = read_request({"problem": document}, tuple(RATIOS)).domain
    mesh = mesh_domain(domain, size=0.4, target=0.3)
    spaces = nested(problem, np.array(mesh.origin) + mesh.unit * mesh.points, mesh.cells)
    enclosures = intervals(result)
    found = disorder(enclosures)
    for (name, part), enclosure in enclosures.items():
        if name in BILINEAR:
            continue
        lower, upper = RATIOS[name](enclosure)
        *_, before, best = references(spaces, name, part)
        if lower > best.value + ROUNDING * best.size:
            found.append(f"{name} {part}: the lower bound {lower} lies above the ratio {best.value} of a function")
        # |a(v, v)| <= gamma |v|^2 for that function too.
        largest = enclosures.get(("continuity", ""), WHOLE)[1]
        if name == "coercivity" and largest < abs(best.value) - ROUNDING * best.size:
            found.append(f"continuity: the upper bound {largest} lies below the ratio {best.value} of a function")
        around = spaces[-1].oscillation if name == "coercivity" else math.inf
        if lower > around * (1 + ROUNDING):
            found.append(f"{name}: the lower bound {lower} lies above the ratio {around} of oscillating functions")
        smooth = contrast(problem) <= LARGEST_CONTRAST and best.value < NEVER_REACHED * around
        converged = before.value - best.value <= CONVERGED * abs(best.value)
        if smooth and converged and upper < best.value - MISSED * abs(best.value):
            found.append(f"{name} {part}: the upper bound {upper} lies below the converged reference {best.value}")
    return found


@pytest.mark.slow
@pytest.mark.parametrize("first", range(0, COUNT, BLOCK))
def test_enclosures_of_random_operators(first: int) -> None:
    """No lower bound above the ratio of a conforming function, no upper bound below what converges (definition)."""
    found = []
    for number in range(first, first + BLOCK):
        problem = case(number)
        try:
            wrong = faults(problem)
        except Exception as error:
            wrong = [f"{type(error).__name__}: {error}"]
        found += [f"{number}: {sentence}\n{json.dumps(problem.document())}" for sentence in wrong]
    assert not found, "\n\n".join(found)


@pytest.mark.slow
def test_every_constant_with_a_ratio_has_a_reference() -> None:
    assert set(RATIOS) == set(PENCILS)
