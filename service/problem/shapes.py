"""Shapes of a problem document: closed rings of vertices, read but not yet checked for sense."""

from typing import Any

import numpy as np

from service.problem import geojson
from service.problem.positions import (
    LARGEST_COORDINATE,
    MOST_POINTS,
    MOST_RINGS,
    Points,
    read_point,
    read_points,
)
from service.problem.reading import Place, Reader, read_alternative, read_list, read_members, read_number
from service.problem.rings import Piece, Ring, Shape

SMALLEST_SIZE = 1e-150
"""Smallest side of a rectangle and smallest extent of a domain, in the user's length unit."""


def read_shape(value: object, place: Place) -> Shape | None:
    """A shape of this version: rectangle, polygon, or a GeoJSON Polygon or MultiPolygon (RFC 7946)."""
    if isinstance(value, dict) and "type" in value:
        return geojson.read_geometry(value, place)
    return read_alternative(value, place, SHAPES)


def read_rectangle(value: object, place: Place) -> Shape | None:
    """``{corner: [x, y], size: [width, height]}``; the corner is the one with the smallest coordinates."""
    members = read_members(value, place, ("corner", "size"))
    if members is None:
        return None
    corner = members.read("corner", read_point)
    size = members.read("size", _read_size)
    if corner is None or size is None:
        return None
    opposite = (corner[0] + size[0], corner[1] + size[1])
    for axis in (0, 1):
        if abs(opposite[axis]) > LARGEST_COORDINATE:
            place.at("size").at(axis).refuse(f"The opposite corner lies beyond {LARGEST_COORDINATE:g}.")
            return None
    (x0, y0), (x1, y1) = corner, opposite
    points = np.array([[x0, y0], [x1, y0], [x1, y1], [x0, y1]])
    return Shape((Piece(Ring(points, place.at("size"), indexed=False), ()),), place)


def read_polygon(value: object, place: Place) -> Shape | None:
    """``{outer: ring, holes: [ring, …]}``; a ring may repeat its first vertex at the end or not."""
    members = read_members(value, place, ("outer",), ("holes",))
    if members is None:
        return None
    outer = members.read("outer", _read_ring)
    holes = members.read("holes", _read_rings) or ()
    return None if outer is None else Shape((Piece(outer, holes),), place)


SHAPES: dict[str, Reader[Shape]] = {"rectangle": read_rectangle, "polygon": read_polygon}
"""The shapes that are chosen by the name of their only member."""


def shape_document(shape: Shape) -> dict[str, Any]:
    """The canonical form: a polygon, or a GeoJSON MultiPolygon where there are several pieces."""
    if len(shape.pieces) > 1:
        return geojson.multi_polygon_document(shape)
    (piece,) = shape.pieces
    holes = [hole.points.tolist() for hole in piece.holes]
    return {"polygon": {"outer": piece.outer.points.tolist(), "holes": holes}}


def _read_size(value: object, place: Place) -> tuple[float, float] | None:
    def side(value: object, place: Place) -> float | None:
        return read_number(value, place, SMALLEST_SIZE, LARGEST_COORDINATE)

    found = read_list(value, place, side, 2, 2)
    return None if found is None else (found[0], found[1])


def _read_ring(value: object, place: Place) -> Ring | None:
    points = read_points(value, place, 3, MOST_POINTS + 1)
    return None if points is None else Ring(without_closing_vertex(points), place)


def _read_rings(value: object, place: Place) -> tuple[Ring, ...] | None:
    found = read_list(value, place, _read_ring, 0, MOST_RINGS)
    return None if found is None else tuple(found)


def without_closing_vertex(points: Points) -> Points:
    """The ring without its last vertex where that repeats the first."""
    return points[:-1] if bool((points[0] == points[-1]).all()) else points
