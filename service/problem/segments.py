"""Plane geometry of many straight segments at once: distances, crossings, neighbours, subdivision."""

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
import shapely
from numpy.typing import NDArray

from service.problem.positions import Points

Indices = NDArray[np.int64]
Mask = NDArray[np.bool_]

MOST_PAIRS = 4_000_000
"""Most pairs of boxes that are looked at because they meet (about a second)."""

MOST_NEAR = 1_000_000
"""Most pairs of segments that are compared in detail."""

ENOUGH_CROSSINGS = 1000
"""Crossings after which no more are looked for."""

_PAIRS_AT_ONCE = 1 << 18


@dataclass(frozen=True)
class BoxPairs:
    """Some pairs (first[k], second[k]) of boxes that meet.

    total : how many pairs have been found so far, in this batch and in those before.
    """

    first: Indices
    second: Indices
    total: int


@dataclass(frozen=True)
class NearPairs:
    """Pairs of segments i < j that come within reach of each other.

    first, second : (k,) numbers i and j, ordered.
    gaps : (k, 4) distances of the start of i, the end of i from segment j, and of the start of j, the
        end of j from segment i.
    crossing : (k,) whether the segments cross, each end being farther than the resolution from the
        other segment.
    complete : whether all pairs were looked at; if not, there are too many of some kind.
    """

    first: Indices
    second: Indices
    gaps: NDArray[np.float64]
    crossing: Mask
    complete: bool


def cross(u: Points, v: Points) -> NDArray[np.float64]:
    """The outer products of two lists of vectors, (n,)."""
    result: NDArray[np.float64] = u[:, 0] * v[:, 1] - u[:, 1] * v[:, 0]
    return result


def inner(u: Points, v: Points) -> NDArray[np.float64]:
    """The inner products of two lists of vectors, (n,)."""
    result: NDArray[np.float64] = (u * v).sum(axis=1)
    return result


def norms(u: Points) -> NDArray[np.float64]:
    """The lengths of a list of vectors, (n,)."""
    return np.hypot(u[:, 0], u[:, 1])


def distances(points: Points, start: Points, end: Points) -> NDArray[np.float64]:
    """Distance of each point from the segment of the same row, (n,)."""
    along = end - start
    offset = points - start
    share = np.clip(inner(offset, along) / inner(along, along), 0.0, 1.0)
    return norms(offset - share[:, None] * along)


def crossing_points(a: Points, b: Points, c: Points, d: Points) -> Points:
    """Where the lines ab and cd meet, (n, 2); the lines must not be parallel."""
    share = cross(c - a, d - c) / cross(b - a, d - c)
    return a + share[:, None] * (b - a)


def boxes(start: Points, end: Points, margin: float) -> NDArray[np.object_]:
    """Bounding boxes of segments, widened by a margin, as shapely polygons."""
    low = np.minimum(start, end) - margin
    high = np.maximum(start, end) + margin
    found: NDArray[np.object_] = shapely.box(low[:, 0], low[:, 1], high[:, 0], high[:, 1])
    return found


def box_pairs(tree: shapely.STRtree, queries: NDArray[np.object_], ascending: bool = False) -> Iterator[BoxPairs]:
    """Pairs (query, box of the tree) that meet, in batches of bounded size.

    ascending : whether to keep only the pairs in which the first number is the smaller one.
    """
    chunk = max(1, 4 * _PAIRS_AT_ONCE // max(len(tree), 1))
    waiting: list[Indices] = []
    total = kept = 0
    for begin in range(0, len(queries), chunk):
        pairs = tree.query(queries[begin : begin + chunk]).astype(np.int64)
        pairs[0] += begin
        waiting.append(pairs[:, pairs[0] < pairs[1]] if ascending else pairs)
        total += waiting[-1].shape[1]
        if total - kept >= _PAIRS_AT_ONCE or begin + chunk >= len(queries):
            joined = np.concatenate(waiting, axis=1)
            yield BoxPairs(joined[0], joined[1], total)
            waiting, kept = [], total


def near_pairs(start: Points, end: Points, reach: float, resolution: float) -> NearPairs:
    """All pairs of segments whose distance is at most ``reach``.

    start, end : (n, 2) ends of the segments, no two equal.
    """
    around = boxes(start, end, reach / 2)
    found: list[tuple[Indices, Indices, NDArray[np.float64], Mask]] = []
    near = crossings = total = 0
    for batch in box_pairs(shapely.STRtree(around), around, ascending=True):
        first, second, total = batch.first, batch.second, batch.total
        rows, gaps, crossing = compare(start[first], end[first], start[second], end[second], reach, resolution)
        found.append((first[rows], second[rows], gaps, crossing))
        near, crossings = near + len(rows), crossings + int(crossing.sum())
        if total > MOST_PAIRS or near > MOST_NEAR or crossings > ENOUGH_CROSSINGS:
            break
    first, second, gaps, crossing = (np.concatenate(column) for column in zip(*found, strict=True))
    order = np.lexsort((second, first))
    complete = total <= MOST_PAIRS and near <= MOST_NEAR and crossings <= ENOUGH_CROSSINGS
    return NearPairs(first[order], second[order], gaps[order], crossing[order], complete)


def compare(
    a: Points, b: Points, c: Points, d: Points, reach: float, resolution: float
) -> tuple[Indices, NDArray[np.float64], Mask]:
    """Rows where the segments ab and cd come within reach, their end distances, whether they cross."""

    def sides(a: Points, b: Points, c: Points, d: Points) -> tuple[Mask, Mask]:
        length = norms(b - a)
        left, right = cross(b - a, c - a) / length, cross(b - a, d - a) / length
        apart = (np.minimum(left, right) > reach) | (np.maximum(left, right) < -reach)
        return apart, np.sign(left) * np.sign(right) < 0

    apart_ab, split_ab = sides(a, b, c, d)
    apart_cd, split_cd = sides(c, d, a, b)
    rows = np.flatnonzero(~apart_ab & ~apart_cd)
    a, b, c, d = a[rows], b[rows], c[rows], d[rows]
    gaps = np.stack([distances(a, c, d), distances(b, c, d), distances(c, a, b), distances(d, a, b)], axis=1)
    smallest = gaps.min(axis=1, initial=np.inf)
    crossing = (split_ab & split_cd)[rows] & (smallest > resolution)
    near = crossing | (smallest <= reach)
    return rows[near], gaps[near], crossing[near]


def lie_exactly_on(points: Points, start: Points, end: Points) -> Mask:
    """Whether each point lies on the segment of the same row, decided without rounding, (n,).

    The coordinates must be at most 1 in absolute value; products below 1e-290 count as nothing.
    """
    found: Mask = np.all((np.minimum(start, end) <= points) & (points <= np.maximum(start, end)), axis=1)
    rows = np.flatnonzero(found)
    (x, y), (x0, y0), (x1, y1) = points[rows].T, start[rows].T, end[rows].T
    # (x1 - x0)(y - y0) - (y1 - y0)(x - x0) as a sum of products, each of them split into two exact terms.
    factors = ((x1, y), (-x1, y0), (-x0, y), (-y1, x), (y1, x0), (y0, x))
    terms = np.stack([part for u, v in factors for part in _exact_product(u, v)], axis=1)
    found[rows] = [math.fsum(row) == 0 for row in terms.tolist()]
    return found


def _exact_product(u: NDArray[np.float64], v: NDArray[np.float64]) -> tuple[NDArray[np.float64], ...]:
    """Two numbers whose exact sum is u v (Dekker, Numerische Mathematik 18, 1971)."""

    def halves(number: NDArray[np.float64]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        shifted = 134217729.0 * number
        high = shifted - (shifted - number)
        return high, number - high

    product = u * v
    (u1, u2), (v1, v2) = halves(u), halves(v)
    return product, u2 * v2 - (((product - u1 * v1) - u2 * v1) - u1 * v2)


@dataclass(frozen=True)
class Subdivision:
    """Edges cut into sub-edges, in the order of the edges and along each edge.

    start, end : (k,) vertices of the sub-edges.
    parent : (k,) the edge each sub-edge belongs to.
    first : (m,) the first sub-edge of each edge.
    """

    start: Indices
    end: Indices
    parent: Indices
    first: Indices


def subdivide(start: Indices, end: Indices, cut_edge: Indices, cut_vertex: Indices) -> Subdivision:
    """Cut edges at vertices; the cuts are ordered by edge and, on each edge, from start to end.

    start, end : (m,) vertices of the edges.
    cut_edge, cut_vertex : (c,) the edge that is cut, and the vertex that cuts it.
    """
    pieces = 1 + np.bincount(cut_edge, minlength=len(start))
    first = np.concatenate([[0], np.cumsum(pieces)[:-1]])
    starts = np.insert(start, cut_edge + 1, cut_vertex)
    ends = np.insert(end, cut_edge, cut_vertex)
    return Subdivision(starts, ends, np.repeat(np.arange(len(start)), pieces), first)


def renumber(start: Indices, end: Indices) -> tuple[Indices, Indices, Indices]:
    """Number the vertices of closed loops in the order in which the edges start at them first.

    start, end : (m,) vertex numbers of the edges; every vertex is the start of some edge.
    Returns the old numbers of the vertices in their new order, and ``start`` and ``end`` renumbered.
    """
    known, first, number = np.unique(start, return_index=True, return_inverse=True)
    order = np.argsort(first)
    label = np.argsort(order)
    return known[order], label[number], label[np.searchsorted(known, end)]
