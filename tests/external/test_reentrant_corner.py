"""The L-shaped domain: a published eigenvalue of fourteen digits, and one known in closed form behind it.

Sources: lambda_1 = 9.6397238440219, Trefethen and Betcke, Contemp. Math. 412 (2006), Jones, Adv. Comput. Math. 43
(2017); lambda_3 = 2 pi^2 by reflecting sin(pi x) sin(pi y) from one of the three squares into the others.
"""

import time

import mpmath
import pytest
from asking import ALL_ROUND, along, ask, enclosure, held, polygon
from plane_shapes import notched

from service.bounds.refine import Budget, enclose
from service.constants.registry import CONSTANTS
from service.forms.form import Pencil, laplace
from service.meshing.generate import mesh_domain
from service.meshing.mesh import Mesh
from service.meshing.refine import refine
from service.problem.request import read_request

L_SHAPE = [(0, 0), (0, -1), (1, -1), (1, 1), (-1, 1), (-1, 0)]

FIRST = "9.6397238440219"
"""All digits published; the true value is within one unit of the last one."""

LAST_DIGIT = "1e-13"


@pytest.mark.parametrize("tolerance", [1e-3, 1e-5, 1e-7])
def test_first_eigenvalue_of_the_l_shape(tolerance: float) -> None:
    answer = ask(polygon(L_SHAPE), ALL_ROUND, tolerance)
    lower, upper = enclosure(answer, "friedrichs", tolerance)
    with mpmath.workdps(40):
        value, unit = mpmath.mpf(FIRST), mpmath.mpf(LAST_DIGIT)
        smallest, largest = 1 / mpmath.mpf(upper) ** 2, 1 / mpmath.mpf(lower) ** 2
        assert smallest <= value + unit
        assert value - unit <= largest


def test_third_eigenvalue_of_the_l_shape() -> None:
    """Counted rightly behind two singular ones, and enclosed to a millionth of the constant."""
    inputs = {"problem": {"domain": {"shape": polygon(L_SHAPE)}, "boundary": ALL_ROUND}}
    domain = read_request(inputs, CONSTANTS).domain

    def mesh_at(size: float) -> Mesh:
        return mesh_domain(domain, size=size, target=1e-8)

    def pencil_on(mesh: Mesh) -> Pencil:
        return laplace(mesh, mesh.part >= 0)

    budget = Budget(1.9e-6, time.monotonic() + 60, 2_000_000)
    last = list(enclose(mesh_at, refine, pencil_on, 3, budget))[-1]
    with mpmath.workdps(40):
        exact = 1 / mpmath.sqrt(2 * mpmath.pi**2)
        upper, lower = (last.mesh.unit / mpmath.sqrt(end) for end in (last.enclosure.lower, last.enclosure.upper))
        assert lower <= exact <= upper
        assert (upper - lower) / upper <= 1e-6


def test_free_re_entrant_sides_make_the_constant_larger() -> None:
    """More functions are admitted (monotonicity of the minimum)."""
    outer = held(along((0, -1), (1, -1), (1, 1), (-1, 1), (-1, 0)))
    some = enclosure(ask(polygon(L_SHAPE), outer, 1e-5), "friedrichs", 1e-5)
    every = enclosure(ask(polygon(L_SHAPE), ALL_ROUND, 1e-5), "friedrichs", 1e-5)
    assert every[1] < some[0]


MIXED = {
    "one re-entrant side": along((0, 0), (0, -1)),
    "both re-entrant sides": along((-1, 0), (0, 0), (0, -1)),
    "an outer side": along((1, -1), (1, 1)),
}


@pytest.mark.parametrize("name", MIXED)
def test_l_shape_held_on_some_sides_to_a_millionth(name: str) -> None:
    """The singularity at the corner has the exponent 1/3 where one of its sides is held, else 2/3."""
    answer = ask(polygon(L_SHAPE), held(MIXED[name]), 1e-6)
    lower, _ = enclosure(answer, "friedrichs", 1e-6)
    every = enclosure(ask(polygon(L_SHAPE), ALL_ROUND, 1e-3), "friedrichs", 1e-3)
    assert every[1] < lower


WEAK = {
    "exponent 1/3": (L_SHAPE, held(along((0, 0), (0, -1)))),
    "exponent 1/4": (notched(359), held(along(*notched(359)[2:4]))),
    "exponent 1/2": ([(0, 0), (1, 0), (1, 1), (0, 1)], held(along((0.25, 0), (0.75, 0)))),
}


@pytest.mark.parametrize("name", WEAK)
def test_asking_for_more_never_gives_less(name: str) -> None:
    """Where layers must go deep: a run for 1e-8 may end early, but not short of the 1e-5 that a run for 1e-5 proves."""
    ring, boundary = WEAK[name]
    plain = enclosure(ask(polygon(ring), boundary, 1e-5, seconds=10), "friedrichs", 1e-5)
    value = ask(polygon(ring), boundary, 1e-8, seconds=10).constant("friedrichs")
    assert value["relative_width"] <= 1e-5
    assert value["lower"] <= plain[1]
    assert plain[0] <= value["upper"]
