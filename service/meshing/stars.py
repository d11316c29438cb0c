"""Sectors between the segments that meet in a vertex at which an interface ends."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.meshing.vectors import turn


@dataclass(frozen=True)
class Stars:
    """The sectors of the domain around vertices, counter-clockwise.

    vertices : (v,) the vertices.
    widths : (v, s) angle of each sector; vertices of fewer sectors end with sectors of angle 0.
    middles : (v, s, 2) unit vector into each sector; those of angle 0 repeat the last other one.
    closed : (v,) whether the vertex is inside the domain, so that the sectors go all round.
    dirichlet : (v, 2) whether the first and the last ray are edges with a Dirichlet condition.
    """

    vertices: NDArray[np.int64]
    widths: NDArray[np.float64]
    middles: NDArray[np.float64]
    closed: NDArray[np.bool_]
    dirichlet: NDArray[np.bool_]


def find_stars(
    points: NDArray[np.float64],
    edges: NDArray[np.int64],
    interfaces: NDArray[np.int64],
    dirichlet: NDArray[np.bool_],
) -> Stars:
    """The sectors at all vertices of interfaces; (0, 0) sectors without interfaces.

    Parameters
    ----------
    points : (n, 2) vertices, any unit; only differences are used.
    edges : (m, 2) start and end of each edge, the domain on its left.
    interfaces : (k, 2) segments inside the domain.
    dirichlet : (m,) whether the edge carries a Dirichlet condition.
    """
    vertices = np.unique(interfaces)
    touched = np.zeros(len(points), dtype=bool)
    touched[vertices] = True
    # Rays: boundary edges from both their ends, interfaces from both theirs.
    rays = np.vstack([edges, edges[:, ::-1], interfaces, interfaces[:, ::-1]])
    kept = touched[rays[:, 0]]
    center, direction = rays[kept, 0], points[rays[kept, 1]] - points[rays[kept, 0]]
    reference = np.tile([1.0, 0.0], (len(points), 1))
    reference[edges[:, 0]] = points[edges[:, 1]] - points[edges[:, 0]]
    angle = turn(reference[center], direction)
    # At the boundary the first ray is the edge from the vertex, the last one the edge towards it.
    order = np.lexsort((angle, center))
    center, angle, direction = center[order], angle[order], direction[order]

    first = np.searchsorted(center, vertices)
    count = np.searchsorted(center, vertices, side="right") - first
    outer = np.zeros(len(points), dtype=bool)
    outer[edges] = True
    closed = ~outer[vertices]
    sectors = np.where(closed, count, count - 1)
    column = np.arange(int(sectors.max(initial=0)))
    inside = column < sectors[:, None]
    here = first[:, None] + np.minimum(column, sectors[:, None] - 1)
    there = first[:, None] + (here - first[:, None] + 1) % count[:, None]
    width = angle[there] - angle[here]
    width = np.where(width > 0, width, width + 2 * np.pi)
    middle = _turned(direction[here], width / 2)
    held = np.zeros((len(points), 2), dtype=bool)
    held[edges[:, 0], 0], held[edges[:, 1], 1] = dirichlet, dirichlet
    return Stars(vertices, np.where(inside, width, 0.0), middle, closed, held[vertices])


def _turned(vectors: NDArray[np.float64], angle: NDArray[np.float64]) -> NDArray[np.float64]:
    """Unit vectors along ``vectors``, (..., 2), turned counter-clockwise by ``angle``, (...)."""
    x, y = np.moveaxis(vectors, -1, 0) / np.hypot(*np.moveaxis(vectors, -1, 0))
    cos, sin = np.cos(angle), np.sin(angle)
    return np.stack([cos * x - sin * y, sin * x + cos * y], axis=-1)
