"""Rings as they were given, and the checks that concern one ring alone."""

from dataclasses import dataclass

import numpy as np

from service.problem.positions import Points, say
from service.problem.reading import Place

MOST_PLACES = 10
"""Places that are listed for one kind of fault of one shape; the last one says how many more there are."""


@dataclass(frozen=True)
class Ring:
    """A closed ring of vertices in the order of the document, without the closing vertex.

    points : (n, 2) vertices in the user's length unit.
    place : where the ring stands in the request.
    indexed : whether the vertices are elements of the value at that place (not so for a rectangle).
    """

    points: Points
    place: Place
    indexed: bool = True

    def vertex(self, index: int) -> Place:
        """Where a vertex stands in the request."""
        return self.place.at(index) if self.indexed else self.place


@dataclass(frozen=True)
class Piece:
    """A polygon with holes."""

    outer: Ring
    holes: tuple[Ring, ...]


@dataclass(frozen=True)
class Shape:
    """The union of pieces that have no inner points in common."""

    pieces: tuple[Piece, ...]
    place: Place

    def rings(self) -> "list[PlacedRing]":
        """All rings in the order of the document."""
        return [
            PlacedRing(ring, number, hole)
            for number, piece in enumerate(self.pieces)
            for ring, hole in ((piece.outer, False), *((hole, True) for hole in piece.holes))
        ]


@dataclass(frozen=True)
class PlacedRing:
    """A ring with the number of the piece it belongs to, and whether it bounds a hole."""

    ring: Ring
    piece: int
    hole: bool


def sound_rings(rings: list[PlacedRing], resolution: float) -> list[bool]:
    """For each ring whether it has three corners, no repeated vertex, no edge too short, and a width.

    Records what is wrong with the others.

    resolution : smallest length that counts, in the user's length unit.
    """
    points = np.concatenate([placed.ring.points for placed in rings])
    sizes = np.array([len(placed.ring.points) for placed in rings])
    first = np.cumsum(sizes) - sizes
    number = np.repeat(np.arange(len(rings)), sizes)
    following = np.arange(1, len(points) + 1)
    following[first + sizes - 1] = first
    steps = points[following] - points
    shortest = np.minimum.reduceat(np.hypot(steps[:, 0], steps[:, 1]), first)
    offsets = points - points[first][number]
    reach = np.hypot(offsets[:, 0], offsets[:, 1])
    farthest = np.lexsort((reach, number))[first + sizes - 1]
    along = offsets[farthest] / np.maximum(reach[farthest], np.finfo(float).tiny)[:, None]
    across = np.abs(along[number, 0] * offsets[:, 1] - along[number, 1] * offsets[:, 0])
    sound = (shortest > resolution) & (np.maximum.reduceat(across, first) > resolution)
    for index in np.flatnonzero(~sound).tolist():
        _complain(rings[index].ring, resolution)
    return [bool(good) for good in sound]


def _complain(ring: Ring, resolution: float) -> None:
    """Record what is wrong with a ring that is not sound."""
    if ring.indexed and len(np.unique(ring.points[:, 0] + 1j * ring.points[:, 1])) < 3:
        ring.place.refuse("A ring needs at least three different vertices.")
    elif _check_edges(ring, resolution):
        ring.place.refuse(
            "The ring encloses no area: all its vertices lie on one line, for example "
            f"{say(ring.points[0])}, {say(ring.points[1])} and {say(ring.points[2])}."
        )


def _check_edges(ring: Ring, resolution: float) -> bool:
    """Whether every edge is long enough to be told from a point."""
    points, count = ring.points, len(ring.points)
    steps = np.roll(points, -1, axis=0) - points
    lengths = np.hypot(steps[:, 0], steps[:, 1])
    short = np.flatnonzero(lengths <= resolution)
    for place_number, first in enumerate(short[:MOST_PLACES].tolist()):
        more = and_more(len(short)) if place_number == MOST_PLACES - 1 else ""
        if not ring.indexed:
            ring.place.refuse(
                f"A side is shorter than {resolution:.3g}, the smallest length that can be told apart "
                "at these coordinates."
            )
            break
        if lengths[first] == 0:
            later = first + 1 if first + 1 < count else first
            other = "the one before it" if first + 1 < count else "the first one"
            ring.vertex(later).refuse(f"This vertex repeats {other}, {say(points[first])}.{more}")
        else:
            ring.vertex(first).refuse(
                f"The edge from {say(points[first])} to {say(points[(first + 1) % count])} is shorter than "
                f"{resolution:.3g}, the smallest length that can be told apart at these coordinates.{more}"
            )
    return len(short) == 0


def and_more(found: int) -> str:
    """The end of the last listed fault of a kind: how many places were not listed."""
    return f" At least {found - MOST_PLACES} more places are like this one." if found > MOST_PLACES else ""
