"""Inputs for the tests of the problem document, and what the tests ask of a domain."""

import copy
from typing import Any

import numpy as np

from service.errors import ProblemError
from service.problem.domain import PlaneDomain
from service.problem.request import Request, read_request

KNOWN = ("friedrichs", "poincare")

SQUARE = [[0, 0], [1, 0], [1, 1], [0, 1]]


def polygon(outer: Any, *holes: Any) -> dict[str, Any]:
    """A polygon shape."""
    return {"polygon": {"outer": outer, "holes": list(holes)}}


def multi(*pieces: Any) -> dict[str, Any]:
    """A GeoJSON MultiPolygon of pieces given by open rings."""
    closed = [[[*ring, ring[0]] for ring in piece] for piece in pieces]
    return {"type": "MultiPolygon", "coordinates": closed}


def part(name: str, on: Any, condition: str = "dirichlet") -> dict[str, Any]:
    """A boundary part."""
    return {"name": name, "on": on, "condition": condition}


def inputs(shape: Any, boundary: Any = None, **more: Any) -> dict[str, Any]:
    """The inputs object for a shape; no member ``boundary`` if that is None."""
    problem: dict[str, Any] = {"domain": {"shape": shape}}
    if boundary is not None:
        problem["boundary"] = boundary
    return {"problem": problem, **more}


def full() -> dict[str, Any]:
    """A valid document with every member there is."""
    return copy.deepcopy(
        {
            "problem": {
                "title": "Basin",
                "length_unit": "km",
                "time_unit": "h",
                "domain": {"shape": polygon(SQUARE, [[0.4, 0.4], [0.6, 0.4], [0.6, 0.6], [0.4, 0.6]])},
                "boundary": [
                    part("inflow", {"segment": [[0, 0.25], [0, 0.75]]}),
                    part("outflow", {"polyline": [[1, 0.5], [1, 1], [0.5, 1]]}, "neumann"),
                    part("island", {"box": [[0.3, 0.3], [0.7, 0.7]]}),
                    part("banks", "remainder", "neumann"),
                ],
            },
            "constants": ["poincare"],
            "tolerance": 0.01,
            "limits": {"seconds": 30, "unknowns": 1000},
        }
    )


def read(shape: Any, boundary: Any = None) -> Request:
    """The request for a shape and its boundary parts."""
    return read_request(inputs(shape, boundary), KNOWN)


def faults(document: Any) -> list[tuple[str, str]]:
    """Pointers and sentences of what is wrong with the inputs; none if they are accepted."""
    try:
        read_request(document, KNOWN)
    except ProblemError as error:
        return [(fault.pointer, fault.detail) for fault in error.faults]
    return []


def pointers(document: Any) -> list[str]:
    """Where the inputs are faulty, without repetition."""
    return list(dict.fromkeys(pointer for pointer, _ in faults(document)))


def lengths(domain: PlaneDomain) -> dict[str, float]:
    """The length of every boundary part."""
    steps = domain.points[domain.edges[:, 1]] - domain.points[domain.edges[:, 0]]
    sums = np.bincount(domain.part, np.hypot(steps[:, 0], steps[:, 1]), len(domain.parts))
    return {part.name: float(length) for part, length in zip(domain.parts, sums, strict=True)}


def area(domain: PlaneDomain) -> float:
    """The area to the left of the edges (Gauss's formula)."""
    start, end = domain.points[domain.edges[:, 0]], domain.points[domain.edges[:, 1]]
    origin = start[0]
    start, end = start - origin, end - origin
    return float((start[:, 0] * end[:, 1] - start[:, 1] * end[:, 0]).sum() / 2)


def edge_set(domain: PlaneDomain) -> set[tuple[float, ...]]:
    """All edges with their parts, whatever their numbering."""
    names = np.array([part.name for part in domain.parts])[domain.part]
    ends = domain.points[domain.edges].reshape(-1, 4)
    return {(*row, name) for row, name in zip(ends.tolist(), names.tolist(), strict=True)}
