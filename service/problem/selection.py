"""What selectors select: spans of boundary edges, found with a tolerance and snapped to it."""

from dataclasses import dataclass

import numpy as np
import shapely
from numpy.typing import NDArray

from service.problem.outline import Outline
from service.problem.positions import Points
from service.problem.segments import Indices, Mask, box_pairs, boxes, cross, inner, norms

TOLERANCE = 1e-9
"""How far a selector may lie beside the boundary, relative to the diameter of the domain."""

_ROUNDING = 1e-15


@dataclass(frozen=True)
class Edges:
    """The boundary edges of a domain, prepared for selection; all lengths scaled.

    start, end : (m, 2) ends of the edges, times 2**-exponent of the outline.
    length : (m,) their lengths, each more than four times the tolerance.
    tolerance : what is closer to a vertex or to another cut is the same point.
    diameter : diagonal of the bounding box.
    tree : the bounding boxes of the edges, widened by the tolerance.
    """

    start: Points
    end: Points
    length: NDArray[np.float64]
    tolerance: float
    diameter: float
    tree: shapely.STRtree


@dataclass(frozen=True)
class Spans:
    """Parts of edges, measured from the start of each edge in scaled length.

    edge : (k,) numbers of edges.
    low, high : (k,) where the span begins and ends; 0 and the length of the edge are its vertices.
    low_point, high_point : (k, 2) the same as points of the plane, scaled.
    """

    edge: Indices
    low: NDArray[np.float64]
    high: NDArray[np.float64]
    low_point: Points
    high_point: Points


NOTHING = Spans(np.zeros(0, np.int64), np.zeros(0), np.zeros(0), np.zeros((0, 2)), np.zeros((0, 2)))
"""No span at all."""


def edges_of(outline: Outline) -> Edges:
    """Prepare the edges of an outline."""
    points = np.ldexp(outline.points, -outline.exponent)
    start, end = points[outline.start], points[outline.end]
    diameter = float(np.hypot(*np.ptp(points, axis=0)))
    # Never so much that two parts of the boundary are mistaken for each other.
    tolerance = max(min(TOLERANCE * diameter, outline.clearance / 4), _ROUNDING)
    return Edges(
        start,
        end,
        norms(end - start),
        tolerance,
        diameter,
        shapely.STRtree(boxes(start, end, tolerance)),
    )


@dataclass(frozen=True)
class Nearby:
    """Pairs (piece of a selector, edge) whose bounding boxes meet."""

    piece: Indices
    edge: Indices


def nearby(edges: Edges, start: Points, end: Points, most: int) -> Nearby | None:
    """The edges near the pieces of a selector, or ``None`` if there are more than ``most`` pairs.

    start, end : (p, 2) opposite corners of the bounding box of each piece, scaled.
    """
    piece, edge = [np.zeros(0, np.int64)], [np.zeros(0, np.int64)]
    for batch in box_pairs(edges.tree, boxes(start, end, edges.tolerance)):
        if batch.total > most:
            return None
        piece.append(batch.first)
        edge.append(batch.second)
    return Nearby(np.concatenate(piece), np.concatenate(edge))


def spans_on_polyline(edges: Edges, points: Points, near: Nearby) -> Spans:
    """What lies on a chain of segments given by scaled points."""
    edge = near.edge
    p, q = points[near.piece], points[near.piece + 1]
    start, length = edges.start[edge], edges.length[edge]
    along = (edges.end[edge] - start) / length[:, None]
    to_p, to_q = inner(p - start, along), inner(q - start, along)
    swap = (to_p > to_q)[:, None]
    spans = _snapped(
        edges,
        edge,
        np.minimum(to_p, to_q),
        np.maximum(to_p, to_q),
        np.where(swap, q, p),
        np.where(swap, p, q),
    )
    # Points that differ in the last bits before the smallest number may coincide after scaling.
    direction = (q - p) / np.maximum(norms(q - p), np.finfo(float).tiny)[:, None]

    def beside(distance: NDArray[np.float64]) -> NDArray[np.float64]:
        """How far the points of the edges at a distance from their starts lie from the segment's line."""
        return np.abs(cross(start + distance[:, None] * along - p, direction))

    on_line = np.maximum(beside(spans.low), beside(spans.high)) <= edges.tolerance
    return _chosen(spans, on_line & _long(edges, spans))


def spans_in_box(edges: Edges, corners: Points, near: Nearby) -> Spans:
    """What lies in a closed box given by its scaled corners."""
    edge = near.edge
    start, end, length = edges.start[edge], edges.end[edge], edges.length[edge]
    low, high = np.zeros(len(edge)), np.ones(len(edge))
    low_point, high_point = start.copy(), end.copy()
    for axis in (0, 1):
        first, last = start[:, axis], end[:, axis]
        for border, side in ((corners[0, axis], 1.0), (corners[1, axis], -1.0)):
            outside_first = side * (border - first) > edges.tolerance
            outside_last = side * (border - last) > edges.tolerance
            crossed = outside_first | outside_last
            step = np.where(last == first, 1.0, last - first)
            share = np.where(outside_first & outside_last, np.inf, (border - first) / step)
            cut = start + np.clip(share, 0.0, 1.0)[:, None] * (end - start)
            cut[:, axis] = border
            enters, leaves = (
                crossed & outside_first & (share > low),
                crossed & ~outside_first & (share < high),
            )
            low, high = np.where(enters, share, low), np.where(leaves, share, high)
            low_point[enters], high_point[leaves] = cut[enters], cut[leaves]
    inside = low < high
    edge, low, high, length = edge[inside], low[inside], high[inside], length[inside]
    spans = _snapped(edges, edge, low * length, high * length, low_point[inside], high_point[inside])
    return _chosen(spans, _long(edges, spans))


def _snapped(
    edges: Edges,
    edge: Indices,
    low: NDArray[np.float64],
    high: NDArray[np.float64],
    low_point: Points,
    high_point: Points,
) -> Spans:
    """Spans clipped to their edges, ends near a vertex moved to it, and end points moved onto the edge."""
    start, end, length = edges.start[edge], edges.end[edge], edges.length[edge]
    along = (end - start) / length[:, None]
    normal = np.stack([-along[:, 1], along[:, 0]], axis=1)

    def snap(distance: NDArray[np.float64], point: Points) -> tuple[NDArray[np.float64], Points]:
        at_start, at_end = distance <= edges.tolerance, distance >= length - edges.tolerance
        foot = point - inner(point - start, normal)[:, None] * normal
        where = np.where(at_start[:, None], start, np.where(at_end[:, None], end, foot))
        return np.where(at_start, 0.0, np.where(at_end, length, distance)), where

    low, low_point = snap(low, low_point)
    high, high_point = snap(high, high_point)
    return Spans(edge, low, high, low_point, high_point)


def _long(edges: Edges, spans: Spans) -> Mask:
    """Which spans are more than a point."""
    long: Mask = spans.high - spans.low > edges.tolerance
    return long


def merged(edges: Edges, spans: Spans) -> Spans:
    """The same selection in as few spans as possible: those that overlap or adjoin are joined."""
    count = len(spans.edge)
    edge = np.concatenate([spans.edge, spans.edge])
    place = np.concatenate([spans.low, spans.high + edges.tolerance])
    change = np.repeat([1, -1], count)
    order = np.lexsort((-change, place, edge))
    covered = np.cumsum(change[order])
    first = order[(covered == 1) & (change[order] == 1)]
    last = order[covered == 0] - count
    return Spans(spans.edge[first], spans.low[first], spans.high[last], spans.low_point[first], spans.high_point[last])


def joined(selections: list[Spans]) -> Spans:
    """The spans of all selections, one selection after the other."""
    every = [NOTHING, *selections]
    return Spans(
        np.concatenate([spans.edge for spans in every]),
        np.concatenate([spans.low for spans in every]),
        np.concatenate([spans.high for spans in every]),
        np.concatenate([spans.low_point for spans in every]),
        np.concatenate([spans.high_point for spans in every]),
    )


def _chosen(spans: Spans, chosen: Mask) -> Spans:
    return Spans(
        spans.edge[chosen],
        spans.low[chosen],
        spans.high[chosen],
        spans.low_point[chosen],
        spans.high_point[chosen],
    )
