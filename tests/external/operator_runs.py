"""Runs of the process ``constants`` on whole problems, and their enclosures as intervals."""

import json
import math
import time
from collections.abc import Sequence
from typing import Any

from asking import Answer

from service.processes.registry import PROCESSES

JSON = dict[str, Any]
Key = tuple[str, str]
"""A constant, and its boundary part; that is empty for constants that have none."""

Interval = tuple[float, float]

WHOLE: Interval = (-math.inf, math.inf)

def ask_problem(problem: JSON, constants: Sequence[str], tolerance: float, seconds: float) -> Answer:
    """One run on a whole problem; what it says on the way is checked to be nested."""
    inputs = {
        "problem": problem,
        "constants": list(constants),
        "tolerance": tolerance,
        "limits": {"seconds": seconds},
    }
    known: dict[Key, Interval] = {}

    def listen(percent: float, message: str, so_far: JSON) -> None:
        json.dumps(so_far, allow_nan=False)  # it is sent as JSON
        for key, (lower, upper) in intervals(so_far).items():
            before = known.get(key, WHOLE)
            assert before[0] <= lower, (key, before, (lower, upper))
            assert upper <= before[1], (key, before, (lower, upper))
            known[key] = lower, upper

    process = PROCESSES["constants"]
    begun = time.monotonic()
    result = process.run(process.accept(inputs), listen)
    json.dumps(result, allow_nan=False)
    answer = Answer(result, time.monotonic() - begun)
    assert {key: intervals(result)[key] for key in known} == known
    return answer


def entries(result: JSON) -> dict[Key, JSON]:
    """All constants of a result that exist."""
    found: dict[Key, JSON] = {}
    for name, value in result["constants"].items():
        parts = {"": value} if "statement" in value else value
        found |= {(name, part): one for part, one in parts.items() if one.get("exists", True)}
    return found


def intervals(result: JSON) -> dict[Key, Interval]:
    """Their enclosures; ends are infinite where nothing was proved."""
    found: dict[Key, Interval] = {}
    for key, entry in entries(result).items():
        lower, upper = entry.get("lower"), entry.get("upper")
        found[key] = (-math.inf if lower is None else lower, math.inf if upper is None else upper)
        assert found[key][0] <= found[key][1], entry
    return found
