"""The member ``boundary`` of a problem document: named parts, their selectors and conditions."""

from dataclasses import dataclass
from functools import partial
from typing import Any

from service.problem.coefficients import Names, read_scalar, scalar_document
from service.problem.domain import Condition
from service.problem.expressions.expression import Expression
from service.problem.names import read_name
from service.problem.piecewise import Piecewise
from service.problem.positions import MOST_POINTS
from service.problem.reading import Place, read_list, read_members
from service.problem.selectors import (
    Polyline,
    Remainder,
    Selector,
    read_selector,
    selector_document,
)

MOST_PARTS = 1000

CONDITIONS: dict[str, Condition] = {"dirichlet": "dirichlet", "neumann": "neumann", "robin": "robin"}


@dataclass(frozen=True)
class PartText:
    """A boundary part as it is written.

    place : where the part stands in the request.
    """

    name: str
    selector: Selector
    condition: Condition
    place: Place
    exchange: Piecewise[Expression] | None = None


def read_boundary(value: object, place: Place, names: Names) -> tuple[PartText, ...] | None:
    """The list of parts; their names differ, one part at most is the remainder.

    names : of the regions of the domain.
    """
    parts = read_list(value, place, partial(_read_part, names=names), 0, MOST_PARTS)
    if parts is None:
        return None
    if sum(len(part.selector.points) for part in parts if isinstance(part.selector, Polyline)) > MOST_POINTS:
        place.refuse(f"The selectors may have at most {MOST_POINTS} points altogether.")
        return None
    used: dict[str, PartText] = {}
    remainder: PartText | None = None
    for part in parts:
        first = used.setdefault(part.name, part)
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
    exchange = {} if part.exchange is None else {"exchange": scalar_document(part.exchange)}
    return {"name": part.name, "on": selector_document(part.selector), "condition": part.condition, **exchange}


def _read_part(value: object, place: Place, names: Names) -> PartText | None:
    members = read_members(value, place, ("name", "on", "condition"), ("exchange",))
    if members is None:
        return None
    name = members.read("name", read_name)
    selector = members.read("on", read_selector)
    condition: Condition | None = members.read("condition", _read_condition)
    exchange = members.read("exchange", partial(read_scalar, names=names))
    if condition == "robin" and "exchange" not in members.values:
        place.at("condition").refuse("A robin part needs the member exchange: the flux per unit of the function.")
    if condition not in (None, "robin") and "exchange" in members.values:
        place.at("exchange").refuse("Only robin parts have an exchange.")
        exchange = None
    if name is None or selector is None or condition is None or (condition == "robin" and exchange is None):
        return None
    return PartText(name, selector, condition, place, exchange)


def _read_condition(value: object, place: Place) -> Condition | None:
    if not isinstance(value, str) or value not in CONDITIONS:
        place.refuse(f"Must be one of: {', '.join(CONDITIONS)}.")
        return None
    return CONDITIONS[value]
