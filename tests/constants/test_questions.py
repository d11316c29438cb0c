"""How a problem becomes a question: domains, statements, units, and when there is nothing to ask."""

from typing import Any

import pytest

from service.constants.base import Absent, Question
from service.constants.registry import CONSTANTS
from service.problem.request import Request, read_request

SQUARE = {"rectangle": {"corner": [0, 0], "size": [1, 1]}}

BOTTOM = {"name": "bottom", "on": {"segment": [[0, 0], [1, 0]]}, "condition": "dirichlet"}
TOP = {"name": "top", "on": {"segment": [[0, 1], [1, 1]]}, "condition": "dirichlet"}
REST = {"name": "rest", "on": "remainder", "condition": "neumann"}


def request(*boundary: dict[str, Any], unit: str = "m") -> Request:
    problem = {"domain": {"shape": SQUARE}, "boundary": list(boundary), "length_unit": unit}
    return read_request({"problem": problem}, CONSTANTS)


def question(name: str, *boundary: dict[str, Any], unit: str = "m") -> Question:
    asked = CONSTANTS[name].ask(request(*boundary, unit=unit))
    assert isinstance(asked, Question)
    return asked


def test_friedrichs_names_what_is_held() -> None:
    statement = question("friedrichs", BOTTOM, TOP, REST).statement
    assert "bottom, top" in statement
    assert "rest" not in statement


def test_friedrichs_needs_a_held_part() -> None:
    asked = CONSTANTS["friedrichs"].ask(request(REST))
    assert isinstance(asked, Absent)
    assert "poincare" in asked.statement


def test_poincare_forgets_all_conditions() -> None:
    """Its domain is free all round, so that the mesh is graded for Neumann corners only."""
    asked = question("poincare", BOTTOM, REST)
    assert {part.condition for part in asked.domain.parts} == {"neumann"}
    assert [part.name for part in asked.domain.parts][:2] == ["bottom", "rest"]


@pytest.mark.parametrize("name", ["friedrichs", "poincare"])
@pytest.mark.parametrize("unit", ["mm", "km"])
def test_constants_are_lengths(name: str, unit: str) -> None:
    assert question(name, BOTTOM, unit=unit).unit == unit


def test_ids_are_their_keys() -> None:
    assert all(constant.id == name for name, constant in CONSTANTS.items())
