"""Keep singular corners apart: no edge of the mesh joins two of them."""

import numpy as np
from numpy.typing import NDArray

from service.meshing.facets import build_facets


def separate(
    points: NDArray[np.float64], triangles: NDArray[np.int64], special: NDArray[np.bool_]
) -> tuple[NDArray[np.float64], NDArray[np.int64]]:
    """Bisect every inner edge between two special vertices; then no triangle has two of them.

    Each pass bisects a set of edges no two of which share a triangle, the longest of each triangle
    first. A new edge ends in a midpoint, which is not special, so the edges to bisect run out.

    Parameters
    ----------
    points : (nv, 2) vertices.
    triangles : (nc, 3) vertex numbers, counter-clockwise.
    special : (nv,) which vertices are special; no two are joined by a boundary facet.

    Returns
    -------
    Points, the given ones first, and counter-clockwise triangles.
    """
    while True:
        rows = np.sort(triangles, axis=1)
        facets = build_facets(rows)
        ends = facets.vertices
        bad = special[ends].all(axis=1) & (facets.facet_cells[:, 1] >= 0)
        if not bad.any():
            return points, triangles
        chosen = _independent(facets.facet_cells, facets.cell_facets, points[ends], bad)
        middle = len(points) + np.arange(len(chosen))
        points = np.vstack([points, points[ends[chosen]].mean(axis=1)])
        triangles = _bisect(triangles, ends[chosen], facets.facet_cells[chosen], middle)
        special = np.concatenate([special, np.zeros(len(chosen), dtype=bool)])


def _independent(
    facet_cells: NDArray[np.int64],
    cell_facets: NDArray[np.int64],
    segments: NDArray[np.float64],
    bad: NDArray[np.bool_],
) -> NDArray[np.int64]:
    """Bad edges that are the longest bad edge of both their triangles (ties: the lowest number)."""
    length = np.where(bad, np.hypot(*(segments[:, 1] - segments[:, 0]).T), -1.0)
    rank = np.empty(len(length), dtype=np.int64)
    rank[np.lexsort((np.arange(len(length)), -length))] = np.arange(len(length))
    leader = np.take_along_axis(cell_facets, rank[cell_facets].argmin(axis=1)[:, None], axis=1)[:, 0]
    agreed = (leader[facet_cells] == np.arange(len(bad))[:, None]).all(axis=1)
    return np.flatnonzero(bad & agreed)


def _bisect(
    triangles: NDArray[np.int64],
    ends: NDArray[np.int64],
    neighbours: NDArray[np.int64],
    middle: NDArray[np.int64],
) -> NDArray[np.int64]:
    """Replace the two triangles at each edge by four."""
    cells, middles = neighbours.ravel(), np.repeat(middle, 2)
    corners, edge_ends = triangles[cells], np.repeat(ends, 2, axis=0)
    low, high = corners == edge_ends[:, :1], corners == edge_ends[:, 1:]
    kept = np.delete(triangles, cells, axis=0)
    halves = [np.where(end, middles[:, None], corners) for end in (low, high)]
    return np.vstack([kept, *halves])
