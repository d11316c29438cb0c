"""The member ``boundary`` of a problem document: named parts, their selectors and conditions."""

from dataclasses import dataclass
from typing import Any

from service.problem.domain import Condition
from service.problem.positions import MOST_POINTS
from service.problem.reading import Place, read_list, read_members, read_text
from service.problem.selectors import (
    Polyline,
    Remainder,
    Selector,
    read_selector,
    selector_document,
)

MOST_PARTS = 1000

LONGEST_NAME = 100

NAME_PATTERN = r"[^\u0000-\u001f\u007f]*[^\u0000-\u0020\u007f][^\u0000-\u001f\u007f]*"

CONDITIONS: dict[str, Condition] = {"dirichlet": "dirichlet", "neumann": "neumann"}


@dataclass(frozen=True)
class PartText:
    """A boundary part as it is written.

    place : where the part stands in the request.
    """

    name: str
    selector: Selector
    condition: Condition
    place: Place


def read_boundary(value: object, place: Place) -> tuple[PartText, ...] | None:
    """The list of parts; names differ, one part at most is the remainder."""
    parts = read_list(value, place, _read_part, 0, MOST_PARTS)
    if parts is None:
        return None
    if sum(len(part.selector.points) for part in parts if isinstance(part.selector, Polyline)) > MOST_POINTS:
        place.refuse(f"The selectors may have at most {MOST_POINTS} points altogether.")
        return None
    names: dict[str, PartText] = {}
    remainder: PartText | None = None
    for part in parts:
        first = names.setdefault(part.name, part)
        if first is not part:
            part.place.at("name").refuse(f"The part at {first.place.pointer} has the same name.")
        if isinstance(part.selector, Remainder):
            if remainder is not None:
                part.place.at("on").refuse(
                    f"The part at {remainder.place.pointer} is the remainder already; there can be only one."
                )
            remainder = remainder or part
    return tuple(parts)


def part_document(part: PartText) -> dict[str, Any]:
    """The canonical form of one part."""
    return {"name": part.name, "on": selector_document(part.selector), "condition": part.condition}


def _read_part(value: object, place: Place) -> PartText | None:
    members = read_members(value, place, ("name", "on", "condition"))
    if members is None:
        return None
    name = members.read("name", _read_name)
    selector = members.read("on", read_selector)
    condition: Condition | None = members.read("condition", _read_condition)
    if name is None or selector is None or condition is None:
        return None
    return PartText(name, selector, condition, place)


def _read_name(value: object, place: Place) -> str | None:
    rule = "Must have a visible character and no control characters."
    return read_text(value, place, LONGEST_NAME, NAME_PATTERN, rule)


def _read_condition(value: object, place: Place) -> Condition | None:
    if not isinstance(value, str) or value not in CONDITIONS:
        place.refuse(f"Must be one of: {', '.join(CONDITIONS)}.")
        return None
    return CONDITIONS[value]
