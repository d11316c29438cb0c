"""What the process ``constants`` says while it runs and at the end."""

import json
import math
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest
from asking import ALL_ROUND, FREE, along, ask, check_history, held, polygon
from plane_shapes import SQUARE, comb

from service.processes.registry import PROCESSES

L_SHAPE = [(0, 0), (0, -1), (1, -1), (1, 1), (-1, 1), (-1, 0)]

BOTH = ("friedrichs", "poincare")

Report = tuple[float, str, dict[str, Any]]


def reports(inputs: dict[str, Any]) -> tuple[list[Report], dict[str, Any]]:
    """Everything one run reports, frozen as it was then, and its result."""
    seen: list[Report] = []

    def report(percent: float, message: str, so_far: dict[str, Any]) -> None:
        seen.append((percent, message, json.loads(json.dumps(so_far))))

    process = PROCESSES["constants"]
    return seen, process.run(process.accept(inputs), report)


def problem(ring: Any, boundary: Any, **more: Any) -> dict[str, Any]:
    return {"problem": {"domain": {"shape": polygon(ring)}, "boundary": boundary}, **more}


def test_every_report_is_a_result_and_only_gets_better() -> None:
    inputs = problem(L_SHAPE, held(along((0, 0), (0, -1))), constants=list(BOTH), tolerance=1e-4)
    seen, result = reports(inputs)
    assert len(seen) == len(result["history"]) >= 3
    percents = [percent for percent, _, _ in seen]
    assert percents == sorted(percents)
    assert all(0 <= percent <= 99 for percent in percents)
    best: dict[str, tuple[float, float]] = {}
    for _, message, so_far in seen:
        check_history(so_far)
        assert message
        for name, value in so_far["constants"].items():
            upper = math.inf if value["upper"] is None else value["upper"]
            lower_before, upper_before = best.get(name, (0.0, math.inf))
            assert lower_before <= value["lower"] <= upper <= upper_before
            assert value["target_met"] is (value["relative_width"] is not None and value["relative_width"] <= 1e-4)
            best[name] = (value["lower"], upper)
    assert result["constants"] == seen[-1][2]["constants"]
    assert result["target_met"] is True


def test_without_a_held_part_friedrichs_is_absent_and_says_what_to_ask_for() -> None:
    answer = ask(polygon(SQUARE), FREE, 1e-2, BOTH)
    absent = answer.constant("friedrichs")
    assert absent["exists"] is False
    assert "poincare" in absent["statement"]
    assert answer.constant("poincare")["target_met"] is True


def test_the_constant_that_makes_sense_is_chosen() -> None:
    assert set(ask(polygon(SQUARE), FREE, 1e-2).result["constants"]) == {"poincare"}
    assert set(ask(polygon(SQUARE), ALL_ROUND, 1e-2).result["constants"]) == {"friedrichs"}


def test_poincare_does_not_depend_on_the_conditions() -> None:
    one = ask(polygon(L_SHAPE), FREE, 1e-4, ["poincare"]).constant("poincare")
    other = ask(polygon(L_SHAPE), held(along((0, 0), (0, -1))), 1e-4, ["poincare"]).constant("poincare")
    assert one["lower"] <= other["upper"]
    assert other["lower"] <= one["upper"]


def test_the_statement_names_the_held_parts() -> None:
    statement = ask(polygon(SQUARE), held(along((0, 0), (1, 0))), 1e-2).constant("friedrichs")["statement"]
    assert "held 0" in statement


@pytest.mark.parametrize("limits", [{"unknowns": 40_000}, {"seconds": 0.2}])
def test_a_limit_ends_the_run_with_a_proved_enclosure_and_a_warning(limits: dict[str, float]) -> None:
    inputs = problem(comb(), ALL_ROUND, tolerance=1e-9, limits=limits)
    _, result = reports(inputs)
    value = result["constants"]["friedrichs"]
    assert result["target_met"] is value["target_met"] is False
    assert any("friedrichs" in warning and "limits" in warning for warning in result["warnings"])
    # The comb lies between its bar and its bounding box (monotonicity, closed forms).
    assert value["lower"] < 1 / (math.pi * math.sqrt(1 + 1 / 1.2**2))
    if value["upper"] is not None:
        assert value["upper"] > 1 / (math.pi * math.sqrt(1 + 1 / 0.2**2))


def test_two_constants_share_the_time() -> None:
    """The first does not use up what the second needs."""
    inputs = problem(comb(), held(along((0, -0.2), (1, -0.2))), constants=list(BOTH), tolerance=1e-10)
    _, result = reports({**inputs, "limits": {"seconds": 6.0}})
    assert set(result["constants"]) == set(BOTH)
    for name in BOTH:
        value = result["constants"][name]
        assert 0 < value["lower"] <= value["upper"]


SCRIPT = """
import json, sys
from service.processes.registry import PROCESSES
process = PROCESSES["constants"]
result = process.run(process.accept(json.load(sys.stdin)), lambda percent, message, so_far: None)
print(json.dumps(result["constants"]))
"""


def test_another_interpreter_gives_the_same_bits() -> None:
    inputs = problem(L_SHAPE, held(along((0, 0), (0, -1))), constants=list(BOTH), tolerance=1e-4)
    _, here = reports(inputs)
    there = subprocess.run(
        [sys.executable, "-c", SCRIPT],
        input=json.dumps(inputs),
        capture_output=True,
        text=True,
        check=True,
        cwd=Path(sys.modules["service"].__path__[0]).parent,
    )
    assert json.loads(there.stdout) == json.loads(json.dumps(here["constants"]))
