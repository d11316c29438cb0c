"""The anytime loop: never wider, within its budget, and honest when nothing can be proved."""

import math
import time

import numpy as np
import pytest
from numpy.typing import NDArray
from small_meshes import everywhere, nowhere, square, square_ratios

from service.bounds import refine as loop
from service.bounds.refine import Budget, enclose, next_order
from service.bounds.ritz import TrialSpace
from service.bounds.sharpen import positive_shift
from service.elements.reference import MAX_ORDER
from service.errors import ComputationError
from service.forms.form import Pencil, laplace
from service.meshing.mesh import Mesh
from service.meshing.refine import refine

Array = NDArray[np.float64]


def mesh_at(size: float) -> Mesh:
    return square(2 ** max(1, math.ceil(math.log2(math.sqrt(2) / size))))


def held(mesh: Mesh) -> Pencil:
    return laplace(mesh, everywhere(mesh))


def free(mesh: Mesh) -> Pencil:
    return laplace(mesh, nowhere(mesh))


def budget(width: float, seconds: float = 60.0, unknowns: int = 10**6) -> Budget:
    return Budget(width, time.monotonic() + seconds, unknowns)


CASES = [("held", index) for index in range(1, 8)] + [("free", index) for index in range(2, 8)]


@pytest.mark.parametrize(("name", "index"), CASES)
def test_every_ratio_of_the_square_whatever_its_multiplicity(name: str, index: int) -> None:
    """2, 5 twice, 8, 10 twice, 13 twice (times pi^2) held; 0, 1 twice, 2, 4 twice, 5 twice free (closed form)."""
    exact = square_ratios(index, name == "held")[index - 1]
    steps = list(enclose(mesh_at, refine, held if name == "held" else free, index, budget(1e-6)))
    before = math.inf
    for step in steps:
        assert step.enclosure.lower <= exact <= step.enclosure.upper
        assert step.enclosure.width <= before
        before = step.enclosure.width
    assert before <= 1e-6


def test_the_number_of_unknowns_is_kept() -> None:
    steps = list(enclose(mesh_at, refine, held, 1, budget(1e-13, unknowns=6000)))
    assert all(step.unknowns <= 6000 for step in steps)
    assert len(steps) >= 3
    assert steps[-1].enclosure.width < 1e-6


@pytest.mark.parametrize("seconds", [0.5, 2.0])
def test_the_deadline_is_kept(seconds: float) -> None:
    begun = time.monotonic()
    steps = list(enclose(mesh_at, refine, held, 1, budget(1e-15, seconds, 10**7)))
    assert time.monotonic() - begun <= 1.5 * seconds
    assert math.isfinite(steps[-1].enclosure.width)


def test_a_mesh_that_cannot_be_had_later_ends_the_loop_with_what_is_known() -> None:
    calls = []

    def once(size: float) -> Mesh:
        calls.append(size)
        if len(calls) > 1:
            raise ComputationError("mesh-too-large", "The mesh would be too large", "No more.")
        return mesh_at(size)

    steps = list(enclose(once, refine, held, 1, budget(1e-15)))
    assert len(calls) == 2
    assert math.isfinite(steps[-1].enclosure.width)


def test_a_mesh_that_cannot_be_had_at_all_is_an_error() -> None:
    def never(size: float) -> Mesh:
        raise ComputationError("mesh-too-large", "The mesh would be too large", "None.")

    with pytest.raises(ComputationError):
        list(enclose(never, refine, held, 1, budget(1e-3)))


@pytest.mark.parametrize(
    ("order", "widths", "following"),
    [
        (3, [1e-1], 4),
        (4, [1e-1, 1e-2], 6),
        (4, [1e-1, 2e-6], 5),
        (4, [1e-1, 0.9e-1], None),
        (MAX_ORDER, [1e-1, 1e-2], None),
        (MAX_ORDER - 1, [1e-1, 1e-2], MAX_ORDER),
        (4, [math.inf, 1e-2], 5),
    ],
)
def test_orders_are_raised_while_that_pays(order: int, widths: list[float], following: int | None) -> None:
    assert next_order(order, widths, 1e-6) == following


@pytest.mark.parametrize("ratio", [1e-9, 0.3, 19.7, 1e12])
def test_shifts_are_powers_of_two_near_the_ratio(ratio: float) -> None:
    shift = positive_shift(held(square(2)), ratio)
    assert math.frexp(shift)[0] == 0.5
    assert 0.7 <= shift / ratio <= 1.5


def test_exact_functions_give_sharp_bounds_at_once() -> None:
    """cos(pi x) is found to the last digits by a high order: both bounds close to a billionth."""
    mesh = square(4)
    pencil = free(mesh)
    space = TrialSpace(pencil, 3)
    prospect = loop.look(pencil, free, refine, space, 2, 6000)
    assert prospect.cut.count == 3
    trial = TrialSpace(pencil, 9)
    start = trial.extend(prospect.functions[:, :, :5], 3)
    ratios, functions = trial.smallest(10.0, 3, 1e-12, start)
    found = loop.sharpen(pencil, 2, prospect.cut, 9, functions, ratios)
    assert found.lower <= np.pi**2 <= found.upper
    assert found.width <= 1e-9
