"""Where rings meet themselves and each other: crossings, touches, shared edges, and near misses.

Two parts of the boundary may meet in exactly equal vertices, or in a vertex that lies exactly on an
edge. Anything else that comes closer than the resolution is a fault: whether such parts touch, cross
or miss each other would hang on rounding.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.problem.positions import Points
from service.problem.segments import (
    Indices,
    Mask,
    crossing_points,
    distances,
    inner,
    lie_exactly_on,
    near_pairs,
)

MOST_EXACT = 200_000
"""Most tests of a vertex against an edge in exact arithmetic (about half a second)."""


@dataclass(frozen=True)
class Web:
    """The edges of all rings of a shape, numbered ring by ring in the order of the document.

    points : (n, 2) different vertices, scaled so that the largest coordinate lies in [1/2, 1).
    given : (n,) where each vertex occurs first among the vertices of all rings.
    start, end : (m,) vertex numbers of each edge.
    ring : (m,) number of the ring of each edge; the edges of a ring follow one another.
    following : (m,) the next edge of the ring.
    piece : (r,) number of the piece of each ring.
    sense : (r,) 1 where the shape lies to the left of the ring as given, else -1.
    resolution : smallest length that counts, in scaled units.
    """

    points: Points
    given: Indices
    start: Indices
    end: Indices
    ring: Indices
    following: Indices
    piece: Indices
    sense: Indices
    resolution: float


@dataclass(frozen=True)
class Meetings:
    """Faults of one kind: the edges concerned and the points where it happens (scaled).

    other : the second edge of each, equal to ``edge`` where only one is concerned.
    """

    edge: Indices
    other: Indices
    points: Points


@dataclass(frozen=True)
class Contacts:
    """What the edges of a web have to do with each other, neighbours along a ring apart.

    spikes : vertices at which a ring turns back on itself; ``edge`` is the edge that starts there.
    crossings, misses : edges that cross; edges closer than the resolution that do not meet exactly.
    self_touches : edges of one ring that meet, where neighbours do not.
    shared : edges of two rings of one piece that have a length in common.
    overlaps : edges of two pieces that have a length in common and the same side inside.
    cut_edge, cut_vertex : (c,) edges and the vertices that lie exactly in their interior, ordered by
        edge and along the edge.
    clearance : smallest distance of two parts of the boundary that do not meet, at most ``reach``.
    complete : whether all pairs of edges were looked at.
    """

    spikes: Meetings
    crossings: Meetings
    misses: Meetings
    self_touches: Meetings
    shared: Meetings
    overlaps: Meetings
    cut_edge: Indices
    cut_vertex: Indices
    clearance: float
    complete: bool


def find_contacts(web: Web, reach: float) -> Contacts:
    """Compare all edges that come within ``reach``, which is not less than the resolution."""
    a, b = web.points[web.start], web.points[web.end]
    spikes, spike_clearance = _spikes(web, reach)
    pairs = near_pairs(a, b, reach, web.resolution)
    neighbours = (web.following[pairs.first] == pairs.second) | (web.following[pairs.second] == pairs.first)
    first, second = pairs.first[~neighbours], pairs.second[~neighbours]
    gaps, crossing = pairs.gaps[~neighbours], pairs.crossing[~neighbours]

    # The four ends of each pair against the other edge: the same vertex, exactly on it, near it, or off it.
    ends = np.stack([web.start[first], web.end[first], web.start[second], web.end[second]], axis=1)
    others = np.stack([second, second, first, first], axis=1)
    same = (ends == web.start[others]) | (ends == web.end[others])
    close = (gaps <= web.resolution) & ~same
    exact = np.zeros_like(close)
    few = int(close.sum()) <= MOST_EXACT
    if few:
        exact[close] = lie_exactly_on(web.points[ends[close]], a[others[close]], b[others[close]])
    missing = (close & ~exact).any(axis=1)
    free = ~same & ~exact & ~crossing[:, None]

    meets = (same | exact) & ~missing[:, None]
    vertex, common = _meeting_vertices(ends, meets)
    rings = web.ring[first], web.ring[second]
    one_ring = rings[0] == rings[1]
    one_piece = web.piece[rings[0]] == web.piece[rings[1]]
    along = inner(
        (b[first] - a[first]) * web.sense[rings[0]][:, None],
        (b[second] - a[second]) * web.sense[rings[1]][:, None],
    )

    def meetings(chosen: Mask, points: Points) -> Meetings:
        return Meetings(second[chosen], first[chosen], points)

    def lines(chosen: Mask) -> tuple[Points, Points, Points, Points]:
        return a[first[chosen]], b[first[chosen]], a[second[chosen]], b[second[chosen]]

    def touching(chosen: Mask) -> Meetings:
        return meetings(chosen, web.points[vertex[chosen]])

    cut_edge, cut_vertex = _cuts(web, others[exact], ends[exact])
    return Contacts(
        spikes,
        meetings(crossing, crossing_points(*lines(crossing))),
        meetings(missing, web.points[ends[missing, np.argmax((close & ~exact)[missing], axis=1)]]),
        touching((common > 0) & one_ring),
        touching((common > 1) & ~one_ring & one_piece),
        touching((common > 1) & ~one_piece & (along > 0)),
        cut_edge,
        cut_vertex,
        min(spike_clearance, float(gaps[free].min(initial=reach))),
        pairs.complete and few,
    )


def _spikes(web: Web, reach: float) -> tuple[Meetings, float]:
    """Vertices at which two neighbouring edges (nearly) coincide, and the distance of all the others."""
    p, q = web.points[web.start], web.points[web.end]
    r = web.points[web.end[web.following]]
    gaps = np.minimum(distances(p, q, r), distances(r, p, q))
    spike = gaps <= web.resolution
    edge = web.following[spike]
    return Meetings(edge, edge, q[spike]), float(gaps[~spike].min(initial=reach))


def _meeting_vertices(ends: Indices, meets: Mask) -> tuple[Indices, NDArray[np.int64]]:
    """For each pair of edges one vertex in which they meet, and how many different ones there are."""
    marked = np.sort(np.where(meets, ends, -1), axis=1)
    different = (marked[:, 1:] != marked[:, :-1]) & (marked[:, 1:] >= 0)
    return marked[:, -1], different.sum(axis=1) + (marked[:, 0] >= 0)


def _cuts(web: Web, edge: Indices, vertex: Indices) -> tuple[Indices, Indices]:
    """The different (edge, vertex) pairs, ordered by edge and along the edge."""
    if len(edge) == 0:
        return edge, vertex
    edge, vertex = np.unique(np.stack([edge, vertex]), axis=1)
    start = web.points[web.start[edge]]
    order = np.lexsort((inner(web.points[vertex] - start, web.points[web.end[edge]] - start), edge))
    return edge[order], vertex[order]
