"""Sides of regions cut wherever they meet each other, the boundary, or a vertex.

Two steps take turns until neither finds anything: sides that pass a vertex within the tolerance are led
through it, and sides that cross get a vertex where they do. Boundary edges never move; corners of
regions that lie on nothing else keep their places; a crossing of two sides lies between the ends of one of
them, which stays straight.
"""

from dataclasses import dataclass

import numpy as np
import shapely

from service.problem.border import Border
from service.problem.drawing import Drawing, RegionError, Strokes, strokes_of
from service.problem.placing import leaders, nearest
from service.problem.positions import Points
from service.problem.segments import (
    MOST_PAIRS,
    Indices,
    box_pairs,
    boxes,
    compare,
    crossing_points,
)

MOST_ROUNDS = 50

MOST_CROSSINGS = 100_000
"""Most places in which sides of regions may cross each other or the boundary."""

TOO_MANY = (
    f"The sides of the regions come close to one another in too many places to look at: more than {MOST_PAIRS} "
    f"pairs whose bounding boxes meet, or {MOST_CROSSINGS} crossings. Fewer or simpler regions help."
)
UNSTABLE = (
    "Near {point} too many sides of regions pass within {tolerance} of each other to be told apart. Let them meet "
    "in equal vertices, or move them apart."
)


@dataclass(frozen=True)
class _Contacts:
    """Strokes that meet strokes or boundary edges, numbered one after the other.

    stroke, vertex : (c,) strokes that pass a vertex within the tolerance that is not one of their ends.
    first, second : (x,) strokes (and, for the second one, edges) that cross far from all their ends.
    """

    stroke: Indices
    vertex: Indices
    first: Indices
    second: Indices


def noded(drawing: Drawing, border: Border) -> Drawing:
    """The drawing with all its active sides cut so that they meet in common vertices only.

    Raises
    ------
    RegionError : there is too much to look at, or no end to it.
    """
    if not drawing.active.any():
        return drawing
    for _ in range(MOST_ROUNDS):
        strokes = strokes_of(drawing)
        contacts = _contacts(drawing, border, strokes)
        if len(contacts.stroke):
            row, side = strokes.sides(contacts.stroke)
            drawing = drawing.cut(side, contacts.vertex[row])
        elif len(contacts.first):
            drawing = _through_crossings(drawing, border, strokes, contacts)
        else:
            return drawing
    raise RegionError(drawing.owner(int(strokes.order[0])), drawing.points[drawing.start[strokes.order[0]]], UNSTABLE)


def _contacts(drawing: Drawing, border: Border, strokes: Strokes) -> _Contacts:
    """Compare all strokes with each other and with the boundary."""
    count = len(strokes.start)
    start, end = np.append(strokes.start, border.start), np.append(strokes.end, border.end)
    a, b = drawing.points[start], drawing.points[end]
    around = boxes(a, b, border.tolerance / 2)
    passing: list[Indices] = []
    crossings: list[Indices] = []
    found = 0
    for batch in box_pairs(shapely.STRtree(around), around[:count], ascending=True):
        i, j = batch.first, batch.second
        rows, gaps, crossing = compare(a[i], b[i], a[j], b[j], border.tolerance, border.tolerance)
        i, j = i[rows], j[rows]
        ends = np.stack([start[i], end[i], start[j], end[j]], axis=1)
        others = np.stack([j, j, i, i], axis=1)
        close = (gaps <= border.tolerance) & (ends != start[others]) & (ends != end[others]) & (others < count)
        passing.append(np.stack([others[close], ends[close]]))
        crossings.append(np.stack([i[crossing], j[crossing]]))
        found += int(crossing.sum())
        if batch.total > MOST_PAIRS or found > MOST_CROSSINGS:
            raise RegionError(drawing.owner(int(strokes.order[0])), a[0], TOO_MANY)
    stroke, vertex = np.concatenate(passing, axis=1)
    first, second = np.concatenate(crossings, axis=1)
    order = np.lexsort((second, first))
    return _Contacts(stroke, vertex, first[order], second[order])


def _through_crossings(drawing: Drawing, border: Border, strokes: Strokes, contacts: _Contacts) -> Drawing:
    """Give sides that cross the boundary a vertex there; when there are none left, those that cross each other.

    Crossings within the tolerance become one.
    """
    count = len(strokes.start)
    at_border = contacts.second >= count
    now = at_border == at_border.any()
    first, second, at_border = contacts.first[now], contacts.second[now], at_border[now]
    ends = np.stack([np.append(strokes.start, border.start), np.append(strokes.end, border.end)], axis=1)
    a, b = drawing.points[ends[second, 0]], drawing.points[ends[second, 1]]
    c, d = drawing.points[ends[first, 0]], drawing.points[ends[first, 1]]
    points = _crossing_points(a, b, c, d)
    line = border.line[second - count] if at_border.any() else border.nearest_lines(points)
    on_line = line >= 0
    points[on_line] = border.on_lines(points[on_line], line[on_line])
    vertex = nearest(drawing.points, points, border.tolerance)
    fresh = np.flatnonzero(vertex < 0)
    leader = leaders(points[fresh], border.tolerance)
    chosen = fresh[np.unique(leader)]
    vertex[fresh] = len(drawing.points) + np.searchsorted(chosen, fresh[leader])

    own, other = _straight(drawing, ends[first[chosen]]), _straight(drawing, ends[second[chosen]])
    between = np.where(own < 0, other, own)
    between[on_line[chosen]] = -1
    row, side = strokes.sides(first if at_border.any() else np.append(first, second))
    return drawing.with_vertices(points[chosen], line[chosen], between).cut(side, np.append(vertex, vertex)[row])


def _crossing_points(a: Points, b: Points, c: Points, d: Points) -> Points:
    """Where the segments ab and cd cross; a coordinate that one of them has everywhere is kept exactly."""
    points = crossing_points(a, b, c, d)
    for p, q in ((c, d), (a, b)):
        points = np.where(p == q, p, points)
    return points


def _straight(drawing: Drawing, ends: Indices) -> Indices:
    """The ends of sides, -1 where one of them lies between other points itself."""
    vertex = np.arange(len(drawing.points))
    divides = (drawing.between[:, 0] != vertex) | (drawing.line >= 0)
    return np.where(divides[ends].any(axis=1)[:, None], -1, ends)
