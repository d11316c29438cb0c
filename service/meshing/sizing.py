"""How large the elements are: a size at every vertex, growing linearly away from it."""

from dataclasses import dataclass

import numpy as np
import shapely
from numpy.typing import NDArray
from scipy.spatial import cKDTree

from service.meshing.vectors import cross, turn

GROWTH = 0.8
"""Increase of the element size per unit of distance from the vertex that asks for a small one."""

_FINE = 0.5


@dataclass(frozen=True)
class SizeFunction:
    """s(x) = min(size, min over groups of (s_g + GROWTH · distance to the vertices of group g)).

    Vertices that ask for sizes within a factor √2 of each other form a group, so that thousands of
    vertices cost one nearest-neighbour search for each group and there are never many groups.

    size : the largest size.
    values : (ng,) size s_g of each group, below ``size``.
    members : for each group, the numbers of its vertices.
    points : (n, 2) all vertices.
    """

    size: float
    values: NDArray[np.float64]
    members: tuple[NDArray[np.int64], ...]
    points: NDArray[np.float64]

    def __call__(self, x: NDArray[np.float64]) -> NDArray[np.float64]:
        """Sizes at the points x, (k, 2), as (k,)."""
        sizes = np.full(len(x), self.size)
        for value, members in zip(self.values, self.members, strict=True):
            distance, _ = cKDTree(self.points[members]).query(x, distance_upper_bound=self.reach(value))
            sizes = np.minimum(sizes, value + GROWTH * distance)
        return sizes

    def reach(self, value: float) -> float:
        """Distance beyond which a vertex of size ``value`` asks for nothing any more."""
        return (self.size - value) / GROWTH


def size_function(points: NDArray[np.float64], sizes: NDArray[np.float64], size: float) -> SizeFunction:
    """Group the vertices by size.

    Parameters
    ----------
    points : (n, 2) vertices.
    sizes : (n,) size that each asks for.
    size : the largest size; vertices that ask for it belong to no group.
    """
    small = np.flatnonzero(sizes < size * (1 - 1e-9))
    octave = np.floor(2 * np.log2(sizes[small] / size)).astype(np.int64)
    members = tuple(small[octave == value] for value in np.unique(octave))
    values = np.array([sizes[group].min() for group in members])
    return SizeFunction(size, values, members, points)


def vertex_sizes(
    points: NDArray[np.float64],
    edges: NDArray[np.int64],
    size: float,
    interfaces: NDArray[np.int64] | None = None,
) -> NDArray[np.float64]:
    """Size that each vertex asks for: its shortest segment, and the gap to what else is near it, (n,).

    Only gaps inside the domain count: the straight way from the vertex to the other segment starts into
    the domain and does not meet an edge from the right.

    Parameters
    ----------
    points : (n, 2) vertices.
    edges : (m, 2) start and end of each edge, the domain on its left.
    size : the largest size.
    interfaces : (k, 2) segments inside the domain.
    """
    segments = edges if interfaces is None else np.vstack([edges, interfaces])
    step = points[segments[:, 1]] - points[segments[:, 0]]
    sizes = np.full(len(points), size)
    np.minimum.at(sizes, segments, np.hypot(*step.T)[:, None])
    tree = shapely.STRtree(shapely.linestrings(points[segments]))
    vertex, segment = tree.query(shapely.points(points), predicate="dwithin", distance=sizes)
    other = (segments[segment] != vertex[:, None]).all(axis=1)
    vertex, segment = vertex[other], segment[other]
    way, left = _way_to_edge(points[vertex], points[segments[segment, 0]], points[segments[segment, 1]])
    left |= segment >= len(edges)
    # Directions of the edges at each vertex; no matter at inner points.
    ahead, back = np.zeros_like(points), np.zeros_like(points)
    ahead[edges[:, 0]], back[edges[:, 1]] = step[: len(edges)], -step[: len(edges)]
    outer = np.zeros(len(points), dtype=bool)
    outer[edges] = True
    into = turn(ahead[vertex], way) < turn(ahead[vertex], back[vertex])
    inside = left & (into | ~outer[vertex])
    gap = np.hypot(*way.T)
    np.minimum.at(sizes, vertex[inside], gap[inside])
    return sizes


@dataclass(frozen=True)
class Subdivision:
    """Every edge cut into pieces.

    points : (k, 2) the vertices, then the inner points of edge 0, of edge 1, … in order.
    edges : (m', 2) the pieces, in the order and direction of the edges.
    parent : (m',) the edge that each piece belongs to.
    host : (k − n,) the edge that each inner point lies on.
    """

    points: NDArray[np.float64]
    edges: NDArray[np.int64]
    parent: NDArray[np.int64]
    host: NDArray[np.int64]


def subdivide(
    points: NDArray[np.float64], edges: NDArray[np.int64], sizes: SizeFunction, least: NDArray[np.int64]
) -> Subdivision:
    """Cut every edge into ⌈∫ds/s⌉ pieces, or ``least`` if that is more, of equal ∫ds/s.

    The integral is taken by the midpoint rule on a fine dyadic subdivision.

    Parameters
    ----------
    points : (n, 2) vertices.
    edges : (m, 2) start and end of each edge.
    sizes : the size function.
    least : (m,) least number of pieces of each edge.
    """
    start, step = points[edges[:, 0]], points[edges[:, 1]] - points[edges[:, 0]]
    edge, left, right, weight = _fine_pieces(start, step, sizes)
    total = np.bincount(edge, weight, minlength=len(edges))
    pieces = np.maximum(least, np.ceil(total - 1e-6).astype(np.int64))
    # Running integral, in units in which every edge has integral 1: edge e covers [e, e + 1].
    reached = np.cumsum(weight / total[edge])
    host = np.repeat(np.arange(len(edges)), pieces - 1)
    rank = np.arange(len(host)) - np.repeat(np.cumsum(pieces - 1) - (pieces - 1), pieces - 1) + 1
    wanted = host + rank / pieces[host]
    piece = np.minimum(np.searchsorted(reached, wanted), len(reached) - 1)
    before = np.where(piece > 0, reached[piece - 1], 0.0)
    share = np.clip((wanted - before) / (reached[piece] - before), 0.0, 1.0)
    t = left[piece] + share * (right[piece] - left[piece])
    inner = start[host] + t[:, None] * step[host]

    parent = np.repeat(np.arange(len(edges)), pieces)
    first = np.cumsum(pieces) - pieces
    ends = np.empty((len(parent), 2), dtype=np.int64)
    chain = len(points) + np.arange(len(host))
    is_first = np.zeros(len(parent), dtype=bool)
    is_first[first] = True
    is_last = np.roll(is_first, -1)
    ends[~is_first, 0] = chain
    ends[~is_last, 1] = chain
    ends[is_first, 0] = edges[:, 0]
    ends[is_last, 1] = edges[:, 1]
    return Subdivision(np.vstack([points, inner]), ends, parent, host)


def _fine_pieces(
    start: NDArray[np.float64], step: NDArray[np.float64], sizes: SizeFunction
) -> tuple[NDArray[np.int64], NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]:
    """Halve the edges until each piece is at most half as long as the size in its middle.

    Returns edge, left and right parameter and length/size of each piece, in order along the edges.
    """
    length = np.hypot(*step.T)
    edge = np.arange(len(start))
    left, right = np.zeros(len(start)), np.ones(len(start))
    done: list[tuple[NDArray[np.int64], NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]] = []
    while len(edge):
        middle = (left + right) / 2
        weight = length[edge] * (right - left) / sizes(start[edge] + middle[:, None] * step[edge])
        ready = weight <= _FINE
        done.append((edge[ready], left[ready], right[ready], weight[ready]))
        edge, left, middle, right = edge[~ready], left[~ready], middle[~ready], right[~ready]
        edge = np.concatenate([edge, edge])
        left, right = np.concatenate([left, middle]), np.concatenate([middle, right])
    edge, left, right, weight = (np.concatenate(column) for column in zip(*done, strict=True))
    order = np.lexsort((left, edge))
    return edge[order], left[order], right[order], weight[order]


def _way_to_edge(
    x: NDArray[np.float64], a: NDArray[np.float64], b: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.bool_]]:
    """Vectors from the points x to the nearest points of the segments ab; whether x is not to their right."""
    along, across = b - a, x - a
    t = np.clip((along * across).sum(axis=1) / (along**2).sum(axis=1), 0.0, 1.0)
    left = cross(along, across) >= 0
    return t[:, None] * along - across, left
