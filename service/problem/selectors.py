"""Selectors of boundary parts as they are written: segment, polyline, box, remainder."""

from dataclasses import dataclass
from typing import Any

import numpy as np

from service.problem.positions import MOST_POINTS, Points, read_point, read_points
from service.problem.reading import Place, Reader, read_alternative, read_choice, read_list

REMAINDER = "remainder"


class Selector:
    """A rule that says which points of the boundary belong to a part."""


@dataclass(frozen=True)
class Polyline(Selector):
    """Everything of the boundary that lies on a chain of segments.

    points : (n, 2) at least two points in the user's length unit, no two consecutive ones equal.
    place : where the points stand in the request.
    """

    points: Points
    place: Place


@dataclass(frozen=True)
class Box(Selector):
    """Everything of the boundary that lies in a closed box with sides along the axes.

    corners : (2, 2) the corners with the smallest and the largest coordinates, in the user's length
        unit; equal in one coordinate at most.
    """

    corners: Points


@dataclass(frozen=True)
class Remainder(Selector):
    """Everything of the boundary that no other part selects."""


def read_selector(value: object, place: Place) -> Selector | None:
    """The member ``on`` of a boundary part."""
    if isinstance(value, str):
        return None if read_choice(value, place, (REMAINDER,)) is None else Remainder()
    if not isinstance(value, dict):
        place.refuse(f"Must be {REMAINDER}, or an object with one of the members {', '.join(SELECTORS)}.")
        return None
    return read_alternative(value, place, SELECTORS)


def read_segment(value: object, place: Place) -> Polyline | None:
    """``[p, q]``: two different points."""
    return _read_chain(value, place, 2)


def read_polyline(value: object, place: Place) -> Polyline | None:
    """``[p, q, …]``: at least two points, no two consecutive ones equal."""
    return _read_chain(value, place, MOST_POINTS)


def _read_chain(value: object, place: Place, most: int) -> Polyline | None:
    points = read_points(value, place, 2, most)
    if points is None:
        return None
    repeated = np.flatnonzero((points[1:] == points[:-1]).all(axis=1))
    if len(repeated):
        place.at(int(repeated[0]) + 1).refuse("This point repeats the one before it.")
        return None
    return Polyline(points, place)


def read_box(value: object, place: Place) -> Box | None:
    """``[[xmin, ymin], [xmax, ymax]]``; a box may be flat in one direction, not in both."""
    found = read_list(value, place, read_point, 2, 2)
    if found is None:
        return None
    low, high = found
    for axis, name in enumerate("xy"):
        if low[axis] > high[axis]:
            place.refuse(f"The smallest {name} comes first, and is greater than the largest here.")
            return None
    if low == high:
        place.refuse("The box is a single point.")
        return None
    return Box(np.array(found))


SELECTORS: dict[str, Reader[Selector]] = {
    "segment": read_segment,
    "polyline": read_polyline,
    "box": read_box,
}
"""The selectors that are chosen by the name of their only member."""


def selector_document(selector: Selector) -> Any:
    """The canonical form; a segment is a polyline with two points."""
    if isinstance(selector, Polyline):
        return {"polyline": selector.points.tolist()}
    if isinstance(selector, Box):
        return {"box": selector.corners.tolist()}
    return REMAINDER
