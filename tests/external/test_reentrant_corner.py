"""The L-shaped domain: a published eigenvalue of fourteen digits, and one known in closed form behind it.

Sources: lambda_1 = 9.6397238440219, Trefethen and Betcke, Contemp. Math. 412 (2006), Jones, Adv. Comput. Math. 43
(2017); lambda_3 = 2 pi^2 by reflecting sin(pi x) sin(pi y) from one of the three squares into the others.
"""

import time
from dataclasses import replace
from functools import partial

import mpmath
import pytest
from asking import ALL_ROUND, along, ask, enclosure, held, polygon

from service.bounds.refine import Budget, enclose
from service.constants.base import Question
from service.constants.registry import CONSTANTS
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


def question(boundary: list[dict[str, object]]) -> Question:
    inputs = {"problem": {"domain": {"shape": polygon(L_SHAPE)}, "boundary": boundary}}
    asked = CONSTANTS["friedrichs"].ask(read_request(inputs, CONSTANTS))
    assert isinstance(asked, Question)
    return asked


def _mesh(asked: Question, size: float) -> Mesh:
    return mesh_domain(asked.domain, size=size, target=1e-8)


def test_third_eigenvalue_of_the_l_shape() -> None:
    """Counted rightly behind two singular ones, and enclosed to a millionth of the constant."""
    asked = replace(question(ALL_ROUND), index=3)
    budget = Budget(1.9e-6, time.monotonic() + 60, 2_000_000)
    steps = list(enclose(partial(_mesh, asked), refine, asked.pencil, asked.index, budget))
    value = steps[-1].enclosure.inverse_root(steps[-1].mesh.unit)
    with mpmath.workdps(40):
        exact = 1 / mpmath.sqrt(2 * mpmath.pi**2)
        lower, upper = mpmath.mpf(value.lower), mpmath.mpf(value.upper)
        assert lower <= exact <= upper
        assert (upper - lower) / upper <= 1e-6


def test_free_re_entrant_sides_make_the_constant_larger() -> None:
    """More functions are admitted (monotonicity of the minimum)."""
    outer = held(along((0, -1), (1, -1), (1, 1), (-1, 1), (-1, 0)))
    some = enclosure(ask(polygon(L_SHAPE), outer, 1e-5), "friedrichs", 1e-5)
    every = enclosure(ask(polygon(L_SHAPE), ALL_ROUND, 1e-5), "friedrichs", 1e-5)
    assert every[1] < some[0]
