"""The corners of regions laid onto the domain: what lies on its boundary, and what is one point."""

import numpy as np
from scipy.spatial import cKDTree

from service.problem.border import Border
from service.problem.drawing import Drawing, RegionError
from service.problem.positions import Points
from service.problem.segments import Indices, Mask

TOO_SMALL = (
    "Near {point} the region has corners closer together than {tolerance}, which cannot be told apart in this "
    "domain. Give it larger features, or leave it out."
)


def drawing_of(border: Border, rings: list[Points], region: Indices) -> Drawing:
    """The rings of regions with their vertices placed.

    A corner within the tolerance of a vertex of the domain is that vertex; one within the tolerance of an
    edge is moved onto it; further corners within the tolerance of each other are the first of them. All
    others keep their places.

    rings : (k, 2) scaled vertices of each ring.
    region : number of the region of each ring.

    Raises
    ------
    RegionError : two corners of one region become one point.
    """
    corners = np.concatenate(rings)
    sizes = np.array([len(ring) for ring in rings])
    first = np.cumsum(sizes) - sizes
    ring = np.repeat(np.arange(len(rings)), sizes)
    following = np.arange(1, len(corners) + 1)
    following[first + sizes - 1] = first
    low, high = border.points.min(axis=0) - border.tolerance, border.points.max(axis=0) + border.tolerance
    ends = np.stack([corners, corners[following]])
    active = np.all((ends.min(axis=0) <= high) & (ends.max(axis=0) >= low), axis=1)

    _, position, number = np.unique(corners[:, 0] + 1j * corners[:, 1], return_index=True, return_inverse=True)
    near = np.zeros(len(position), dtype=bool)
    near[number[active]] = near[number[following[active]]] = True
    order = np.argsort(position)  # in the order of the document
    label, points, line = _placed(border, corners[position[order]], near[order])
    rank = np.argsort(order)
    start = label[rank[number]]
    drawing = Drawing(
        points=np.concatenate([border.points, points]),
        line=np.concatenate([np.full(len(border.points), -1), line]),
        between=np.repeat(np.arange(len(border.points) + len(points))[:, None], 2, axis=1),
        start=start,
        end=start[following],
        ring=ring,
        region=region,
        active=active,
    )
    _refuse_merged(drawing, number)
    return drawing


def _placed(border: Border, corners: Points, near: Mask) -> tuple[Indices, Points, Indices]:
    """A vertex number for each corner; the points of the new vertices, and the lines they lie on."""
    known = np.full(len(corners), -1, dtype=np.int64)
    line = np.full(len(corners), -1, dtype=np.int64)
    places = corners.copy()
    close = np.flatnonzero(near)
    known[close] = nearest(border.points, corners[close], border.tolerance)
    close = close[known[close] < 0]
    line[close] = border.nearest_lines(corners[close])
    moved = close[line[close] >= 0]
    places[moved] = border.on_lines(corners[moved], line[moved])
    known[moved] = nearest(border.points, places[moved], border.tolerance)
    close = close[known[close] < 0]
    leader = np.arange(len(corners))
    leader[close] = close[leaders(places[close], border.tolerance)]
    kept = (leader == np.arange(len(corners))) & (known < 0)
    new = len(border.points) + np.cumsum(kept) - 1
    return np.where(known < 0, new[leader], known), places[kept], line[kept]


def nearest(known: Points, points: Points, tolerance: float) -> Indices:
    """The number of the closest known point within the tolerance, -1 where there is none, (k,)."""
    if len(points) == 0 or len(known) == 0:
        return np.full(len(points), -1, dtype=np.int64)
    gap, found = cKDTree(known).query(points)
    return np.where(gap <= tolerance, found, -1)


def leaders(points: Points, tolerance: float) -> Indices:
    """For each point the first one within the tolerance that follows no other itself, (k,)."""
    leader = np.arange(len(points))
    if len(points) < 2:
        return leader
    pairs = cKDTree(points).query_pairs(tolerance, output_type="ndarray")
    pairs = np.sort(pairs, axis=1)
    for first, second in pairs[np.lexsort((pairs[:, 0], pairs[:, 1]))].tolist():
        if leader[first] == first and leader[second] == second:
            leader[second] = first
    return leader


def _refuse_merged(drawing: Drawing, number: Indices) -> None:
    """Find a region two different corners of which have become one vertex."""
    region = drawing.region[drawing.ring]
    triples = np.unique(np.stack([region, drawing.start, number]), axis=1)
    same = (np.diff(triples[:2], axis=1) == 0).all(axis=0)
    if same.any():
        where, vertex = triples[:2, np.argmax(same)]
        raise RegionError(int(where), drawing.points[vertex], TOO_SMALL)
