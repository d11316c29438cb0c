"""GeoJSON geometry objects (RFC 7946) as shapes; their numbers are plane coordinates, not degrees.

Foreign members are refused like unknown members anywhere in the request. Altitudes are accepted where
all positions of the geometry have the same one, for then they say nothing about the plane domain.
"""

from typing import Any

import numpy as np

from service.problem.positions import MOST_POINTS, MOST_RINGS, read_coordinate, read_points
from service.problem.reading import Place, Reader, check_length, read_choice, read_list, read_members
from service.problem.rings import Piece, Ring, Shape

TYPES = ("Polygon", "MultiPolygon")


def read_geometry(value: object, place: Place) -> Shape | None:
    """A Polygon or MultiPolygon geometry object; its ``bbox`` is checked for form and then ignored."""
    members = read_members(value, place, ("type", "coordinates"), ("bbox",))
    if members is None:
        return None
    kind = members.read("type", lambda value, place: read_choice(value, place, TYPES))
    members.read("bbox", _read_bbox)
    altitudes: set[float | None] = set()

    def ring(value: object, place: Place) -> Ring | None:
        return _read_ring(value, place, altitudes)

    def polygon(value: object, place: Place) -> Piece | None:
        rings = read_list(value, place, lambda value, place: _read_ring(value, place, altitudes), 1, MOST_RINGS)
        return None if rings is None else Piece(rings[0], tuple(rings[1:]))

    if kind == "Polygon":
        piece = members.read("coordinates", polygon)
        pieces = None if piece is None else [piece]
    elif kind == "MultiPolygon":
        pieces = members.read("coordinates", lambda value, place: _read_polygons(value, place, polygon))
    else:
        return None
    if len(altitudes) > 1:
        place.at("coordinates").refuse("The altitudes of the positions must all be equal, or all be absent.")
        return None
    return None if pieces is None else Shape(tuple(pieces), place)


def _read_polygons(value: object, place: Place, read: Reader[Piece]) -> list[Piece] | None:
    """The polygons of a MultiPolygon, unless they have too many rings altogether to look at each."""
    if isinstance(value, list) and sum(len(rings) for rings in value if isinstance(rings, list)) > MOST_RINGS:
        place.refuse(f"A shape may have at most {MOST_RINGS} rings.")
        return None
    return read_list(value, place, read, 1, MOST_RINGS)


def multi_polygon_document(shape: Shape) -> dict[str, Any]:
    """The shape as a MultiPolygon with closed rings."""
    coordinates = [[_closed(ring) for ring in (piece.outer, *piece.holes)] for piece in shape.pieces]
    return {"type": "MultiPolygon", "coordinates": coordinates}


def _closed(ring: Ring) -> list[list[float]]:
    return [[float(x), float(y)] for x, y in np.concatenate([ring.points, ring.points[:1]]).tolist()]


def _read_ring(value: object, place: Place, altitudes: set[float | None]) -> Ring | None:
    """A linear ring: closed, at least four positions (RFC 7946, section 3.1.6)."""
    positions = read_points(value, place, 4, MOST_POINTS + 1, sizes=(2, 3))
    if positions is None:
        return None
    if not bool((positions[0] == positions[-1]).all()):
        place.refuse("A GeoJSON ring must end with the position it starts with (RFC 7946, section 3.1.6).")
        return None
    altitudes.update(positions[:, 2].tolist() if positions.shape[1] == 3 else [None])
    return Ring(positions[:-1, :2].copy(), place)


def _read_bbox(value: object, place: Place) -> tuple[float, ...] | None:
    """A bounding box of two or three dimensions (RFC 7946, section 5)."""
    if not check_length(value, place, 4, 6):
        return None
    found = read_list(value, place, read_coordinate)
    if found is not None and len(found) == 5:
        place.refuse("Must have 4 or 6 numbers.")
        return None
    return None if found is None else tuple(found)
