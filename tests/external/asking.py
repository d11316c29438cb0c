"""Asks the process ``constants`` as the service does, and checks what every answer must have."""

import time
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Any

import mpmath

from service.processes.registry import PROCESSES

JSON = dict[str, Any]
Ring = Sequence[Sequence[float]]

SECONDS = 60.0
UNKNOWNS = 2_000_000


@dataclass(frozen=True)
class Answer:
    """What one run said, and how long it took."""

    result: JSON
    seconds: float

    def constant(self, name: str) -> JSON:
        """One constant of the result."""
        return dict(self.result["constants"][name])

    @property
    def unknowns(self) -> int:
        """Unknowns of the largest step."""
        return max(int(step["unknowns"]) for step in self.result["history"])


def polygon(outer: Ring, *holes: Ring) -> JSON:
    """A polygon shape from rings of points."""
    return {"polygon": {"outer": points(outer), "holes": [points(hole) for hole in holes]}}


def points(ring: Iterable[Sequence[float]]) -> list[list[float]]:
    """Plain floats, as JSON has them."""
    return [[float(x), float(y)] for x, y in ring]


def held(*selectors: Any) -> list[JSON]:
    """Boundary parts that hold functions at zero; the rest is free."""
    return [{"name": f"held {i}", "on": on, "condition": "dirichlet"} for i, on in enumerate(selectors)]


def along(*chain: Sequence[float]) -> JSON:
    """The selector of a chain of segments."""
    return {"polyline": points(chain)}


ALL_ROUND = held("remainder")
FREE: list[JSON] = []


def ask(
    shape: JSON,
    boundary: list[JSON],
    tolerance: float,
    constants: Sequence[str] | None = None,
    seconds: float = SECONDS,
) -> Answer:
    """One run of the process; every step of its history is checked to be no wider than the one before."""
    inputs: JSON = {
        "problem": {"domain": {"shape": shape}, "boundary": boundary},
        "tolerance": tolerance,
        "limits": {"seconds": seconds, "unknowns": UNKNOWNS},
    }
    if constants is not None:
        inputs["constants"] = list(constants)
    process = PROCESSES["constants"]
    begun = time.monotonic()
    result = process.run(process.accept(inputs), lambda percent, message, so_far: None)
    answer = Answer(result, time.monotonic() - begun)
    check_history(result)
    return answer


def check_history(result: JSON) -> None:
    """Widths never grow from one step to the next."""
    last: dict[str, float] = {}
    for step in result["history"]:
        for name, width in step["widths"].items():
            now = float("inf") if width is None else float(width)
            assert now <= last.get(name, float("inf")), f"{name} grew wider: {result['history']}"
            last[name] = now


def enclosure(answer: Answer, name: str, tolerance: float) -> tuple[float, float]:
    """Both ends of one constant, proved to the tolerance within the limits of the main job."""
    value = answer.constant(name)
    assert value["rigour"] == "guaranteed"
    assert value["rounding"] == "included"
    lower, upper = value["lower"], value["upper"]
    assert upper is not None, "no upper bound was proved"
    assert 0 < lower <= upper
    with mpmath.workdps(40):
        width = (mpmath.mpf(upper) - mpmath.mpf(lower)) / mpmath.mpf(upper)
        assert width <= value["relative_width"] * (1 + 1e-12)
        assert width <= tolerance
    assert value["target_met"] is True
    assert answer.result["target_met"] is True
    assert answer.seconds <= SECONDS
    assert answer.unknowns <= UNKNOWNS
    return lower, upper


def check_contains(answer: Answer, name: str, exact: Any, tolerance: float) -> None:
    """The enclosure of one constant contains a value known in multiple precision, and is as narrow as asked."""
    lower, upper = enclosure(answer, name, tolerance)
    with mpmath.workdps(40):
        assert mpmath.mpf(lower) <= exact <= mpmath.mpf(upper), (lower, mpmath.nstr(exact, 25), upper)
