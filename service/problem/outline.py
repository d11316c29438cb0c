"""From rings to the boundary of a domain: oriented loops, or the faults that forbid it."""

from dataclasses import dataclass

import numpy as np
import shapely

from service.problem.complaints import report_contacts, report_strays
from service.problem.contacts import Contacts, Web, find_contacts
from service.problem.faces import bounded_faces
from service.problem.positions import MOST_POINTS, Points
from service.problem.rings import PlacedRing, Shape, sound_rings
from service.problem.segments import MOST_PAIRS, Indices, box_pairs, boxes, cross, renumber, subdivide

RESOLUTION = 1e-9
"""Smallest feature of a domain (edge, gap, width), relative to its largest absolute coordinate."""

REACH = 12 * RESOLUTION
"""Up to this distance, relative to the largest absolute coordinate, gaps are measured."""

SMALLEST_EXTENT = 1e-150
"""Smallest extent of a domain in the user's length unit."""


@dataclass(frozen=True)
class Outline:
    """The boundary of a domain, before boundary parts are chosen.

    points : (n, 2) different vertices in the user's length unit, bit by bit as they were given.
    exponent : ``points * 2**-exponent`` has its largest absolute coordinate in [1/2, 1).
    start, end : (m,) vertex numbers of each edge; the domain lies to its left.
    loop : (m,) number of the simple loop each edge belongs to; the edges of a loop follow one another.
    components : number of connected pieces of the open set.
    clearance : smallest distance of two parts of the boundary that do not meet, or REACH where that
        is smaller; relative to the largest absolute coordinate.
    """

    points: Points
    exponent: int
    start: Indices
    end: Indices
    loop: Indices
    components: int
    clearance: float


def outline_of(shape: Shape) -> Outline | None:
    """The outline of a shape, ``None`` after its faults have been recorded at their places."""
    rings = shape.rings()
    points = np.concatenate([placed.ring.points for placed in rings])
    if len(points) > MOST_POINTS:
        shape.place.refuse(f"A shape may have at most {MOST_POINTS} vertices.")
        return None
    largest = float(np.abs(points).max())
    good = sound_rings(rings, RESOLUTION * largest)
    sound = [placed for placed, fine in zip(rings, good, strict=True) if fine]
    if not sound:
        return None
    if float(np.ptp(points, axis=0).max()) < SMALLEST_EXTENT:
        shape.place.refuse(f"The shape must extend over at least {SMALLEST_EXTENT:g} length units.")
        return None
    exponent = int(np.frexp(largest)[1])
    unit = float(np.ldexp(largest, -exponent))
    web = _web(sound, exponent, RESOLUTION * unit)
    contacts = find_contacts(web, REACH * unit)
    if not report_contacts(shape, sound, web, contacts, exponent) or not all(good):
        return None
    if not _few_nested(sound):
        shape.place.refuse(
            f"The bounding boxes of the rings meet in more than {MOST_PAIRS} pairs, too many for their "
            "nesting to be checked. Fewer rings help."
        )
        return None
    return _trace(sound, web, contacts, exponent)


def _few_nested(rings: list[PlacedRing]) -> bool:
    """Whether the bounding boxes of the rings meet in few enough pairs to look at each."""
    low = np.array([placed.ring.points.min(axis=0) for placed in rings])
    high = np.array([placed.ring.points.max(axis=0) for placed in rings])
    around = boxes(low, high, 0.0)
    batches = box_pairs(shapely.STRtree(around), around, ascending=True)
    return all(batch.total <= MOST_PAIRS for batch in batches)


def _web(rings: list[PlacedRing], exponent: int, resolution: float) -> Web:
    """Number the edges and the different vertices of rings."""
    points = np.ldexp(np.concatenate([placed.ring.points for placed in rings]), -exponent)
    sizes = np.array([len(placed.ring.points) for placed in rings])
    first = np.cumsum(sizes) - sizes
    ring = np.repeat(np.arange(len(rings)), sizes)
    following = np.arange(1, len(points) + 1)
    following[first + sizes - 1] = first
    offset = points - points[first][ring]
    area = np.add.reduceat(cross(offset, offset[following]), first)
    hole = np.array([placed.hole for placed in rings])
    _, position, number = np.unique(points[:, 0] + 1j * points[:, 1], return_index=True, return_inverse=True)
    return Web(
        points=points[position],
        given=position,
        start=number,
        end=number[following],
        ring=ring,
        following=following,
        piece=np.array([placed.piece for placed in rings]),
        sense=np.where((area > 0) == hole, -1, 1),
        resolution=resolution,
    )


def _trace(rings: list[PlacedRing], web: Web, contacts: Contacts, exponent: int) -> Outline | None:
    """Cut the edges where vertices touch them, drop what two pieces share, and follow the rest."""
    cut = subdivide(web.start, web.end, contacts.cut_edge, contacts.cut_vertex)
    edge = _domain_on_left(web, cut.parent)
    reverse = web.sense[web.ring[cut.parent[edge]]] < 0
    start = np.where(reverse, cut.end[edge], cut.start[edge])
    end = np.where(reverse, cut.start[edge], cut.end[edge])
    size = len(web.points)
    kept = ~np.isin(start * size + end, end * size + start)
    start, end, parent = start[kept], end[kept], cut.parent[edge[kept]]
    ring = web.ring[parent]
    busy = np.bincount(start, minlength=size) > 1
    breaks = (np.diff(ring) != 0) | (end[:-1] != start[1:]) | busy[start[1:]]
    faces = bounded_faces(web.points, start, end, np.concatenate([[0], np.cumsum(breaks)]))
    if len(faces.stray):
        report_strays(rings, web, parent[faces.stray], exponent)
        return None
    used, start, end = renumber(start[faces.order], end[faces.order])
    everything = np.concatenate([placed.ring.points for placed in rings])
    return Outline(
        points=everything[web.given[used]],
        exponent=exponent,
        start=start,
        end=end,
        loop=faces.loop,
        components=faces.components,
        clearance=contacts.clearance,
    )


def _domain_on_left(web: Web, parent: Indices) -> Indices:
    """The order of the sub-edges in which every ring is walked with the domain on its left."""
    ring = web.ring[parent]
    count = np.bincount(ring)
    first = (np.cumsum(count) - count)[ring]
    here = np.arange(len(ring))
    found: Indices = np.where(web.sense[ring] < 0, 2 * first + count[ring] - 1 - here, here)
    return found
