"""Results so far: whether they hold anything, and how one becomes the result when time is up."""

from typing import Any

from service.processes.base import JSON


def has_enclosure(value: Any) -> bool:
    """Whether a result document has, at any depth, an object with numeric ``lower`` and ``upper``."""
    if isinstance(value, dict):
        ends = value.get("lower"), value.get("upper")
        if all(isinstance(end, int | float) and not isinstance(end, bool) for end in ends):
            return True
        return any(has_enclosure(member) for member in value.values())
    return isinstance(value, list) and any(has_enclosure(item) for item in value)


def cut_short(partial: JSON, seconds: float) -> JSON:
    """The result of a job killed after ``seconds``: its last partial, and a warning that says so."""
    warning = (
        f"The computation was stopped after {seconds:g} s, before it reached its target. "
        "The enclosures are those proved until then; each is valid as it stands."
    )
    return {**partial, "target_met": False, "warnings": [*partial.get("warnings", []), warning]}
