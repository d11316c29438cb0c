"""The sentences about rings that cross, touch or nest wrongly, each at its place in the request."""

from itertools import pairwise
from typing import Any

import numpy as np
import shapely
from numpy.typing import NDArray

from service.problem.contacts import Contacts, Meetings, Web
from service.problem.positions import say
from service.problem.reading import Place
from service.problem.rings import MOST_PLACES, PlacedRing, Shape, and_more
from service.problem.segments import MOST_NEAR, MOST_PAIRS, Indices

MOST_COMPARED = 1000
"""Most rings that are compared with a misplaced one in the search for a point to show."""


def report_contacts(shape: Shape, rings: list[PlacedRing], web: Web, contacts: Contacts, exponent: int) -> bool:
    """Record everything in the contacts that forbids a domain; whether there was nothing.

    rings : the rings of the web, in its order.
    exponent : the web's points times 2**exponent are in the user's length unit.
    """
    first = np.searchsorted(web.ring, np.arange(len(rings)))

    def vertex(edge: int) -> Place:
        """The place of the vertex an edge starts at."""
        ring = int(web.ring[edge])
        return rings[ring].ring.vertex(edge - int(first[ring]))

    kinds = (
        (contacts.spikes, "The boundary turns back on itself in {point}, and has no width there."),
        (
            contacts.crossings,
            "The edge that starts here crosses the edge that starts at {other}, in {point}.",
        ),
        (
            contacts.misses,
            "The edge that starts here comes closer than {resolution} to the edge that starts at {other}, "
            "near {point}, without meeting it exactly. Such parts cannot be told apart at these "
            "coordinates: give both an equal vertex there, or move them apart.",
        ),
        (
            contacts.self_touches,
            "The ring touches itself in {point}, where the edge that starts here meets the edge that "
            "starts at {other}.",
        ),
        (
            contacts.shared,
            "The edge that starts here runs along the edge that starts at {other}, from {point}; rings of "
            "one polygon may have single points in common, but no length.",
        ),
        (
            contacts.overlaps,
            "The edge that starts here and the edge that starts at {other} run along each other from "
            "{point} with both pieces on the same side; pieces must not overlap.",
        ),
    )
    resolution = f"{np.ldexp(web.resolution, exponent):.3g}"
    for meetings, sentence in kinds:
        chosen = _one_per_point(meetings)
        for count, index in enumerate(chosen[:MOST_PLACES].tolist(), start=1):
            text = sentence.format(
                point=say(np.ldexp(meetings.points[index], exponent)),
                other=vertex(int(meetings.other[index])).pointer,
                resolution=resolution,
            )
            vertex(int(meetings.edge[index])).refuse(text + (and_more(len(chosen)) if count == MOST_PLACES else ""))
    quiet = all(len(meetings.edge) == 0 for meetings, _ in kinds)
    if quiet and not contacts.complete:
        shape.place.refuse(
            f"Too many edges lie close together for the shape to be checked: more than {MOST_PAIRS} pairs "
            f"whose bounding boxes meet, or {MOST_NEAR} pairs that touch. Fewer or shorter edges help."
        )
    return quiet and contacts.complete


def _one_per_point(meetings: Meetings) -> Indices:
    """The meetings in the order of the document, only the first of those in one point."""
    order = np.lexsort((meetings.other, meetings.edge))
    points = meetings.points[order]
    _, first = np.unique(points[:, 0] + 1j * points[:, 1], return_index=True)
    return order[np.sort(first)]


def report_strays(rings: list[PlacedRing], web: Web, stray: Indices, exponent: int) -> None:
    """Record which rings lie where they must not, given edges that do not bound the shape.

    stray : numbers of edges of the web; no two edges cross or share a length against the rules.
    """
    numbers = np.unique(web.ring[stray])
    chosen = [number for number in numbers.tolist() if rings[number].hole] or numbers.tolist()
    first = np.searchsorted(web.ring, np.arange(len(rings) + 1))
    polygons = np.array([shapely.Polygon(web.points[web.start[f:t]]) for f, t in pairwise(first.tolist())])
    for count, number in enumerate(chosen[:MOST_PLACES], start=1):
        sentence, region = _misplaced(rings, polygons, number)
        where = shapely.get_coordinates(shapely.point_on_surface(region))[0]
        more = and_more(len(chosen)) if count == MOST_PLACES else ""
        rings[number].ring.place.refuse(f"{sentence} near {say(np.ldexp(where, exponent))}.{more}")


def _misplaced(rings: list[PlacedRing], polygons: NDArray[np.object_], number: int) -> tuple[str, Any]:
    """What is wrong with a ring that lies in the wrong place, and the region that shows it."""
    piece = np.array([placed.piece for placed in rings])
    hole = np.array([placed.hole for placed in rings])
    near = shapely.STRtree(polygons).query(polygons[number])
    near = near[near != number]
    if hole[number]:
        outer = polygons[np.flatnonzero((piece == piece[number]) & ~hole)[0]]
        outside = polygons[number].difference(outer)
        if outside.area > 0:
            return "This hole does not lie inside the outer ring: it leaves it", outside
        near = near[hole[near] & (piece[near] == piece[number])]
        return "This hole and another one overlap", _common(polygons[number], polygons[near])
    own_holes = polygons[(piece == piece[number]) & hole]
    own = polygons[number].difference(shapely.union_all(own_holes))
    near = near[piece[near] != piece[number]]
    common = own
    for other in near[~hole[near]][:MOST_COMPARED].tolist():
        its_holes = near[hole[near] & (piece[near] == piece[other])]
        common = own.intersection(polygons[other]).difference(shapely.union_all(polygons[its_holes]))
        if common.area > 0:
            break
    return "This piece overlaps another one", common if common.area > 0 else own


def _common(polygon: Any, others: NDArray[np.object_]) -> Any:
    """The first region with an area that a polygon shares with others, itself if there is none."""
    regions = shapely.intersection(polygon, others[:MOST_COMPARED])
    large = np.flatnonzero(shapely.area(regions) > 0)
    return regions[large[0]] if len(large) else polygon
