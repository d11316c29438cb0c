"""From directed edges to the connected open sets that lie to their left."""

from dataclasses import dataclass

import numpy as np
import shapely
from numpy.typing import NDArray

from service.problem.positions import Points
from service.problem.segments import Indices, Mask


@dataclass(frozen=True)
class Faces:
    """The connected sets whose boundary consists of given directed edges, as loops of edges.

    order : (k,) numbers of the directed edges, loop by loop and along each loop. Every loop starts
        with its edge of lowest number; a loop that surrounds a face comes before the holes of the face.
    loop : (k,) number of the loop of each edge in ``order``.
    components : number of faces.
    stray : (s,) edges with no face on their left, or with one on their right too: none where the edges
        are the boundary of a set.
    """

    order: Indices
    loop: Indices
    components: int
    stray: Indices


def bounded_faces(points: Points, start: Indices, end: Indices, chain: Indices) -> Faces:
    """Trace the faces to the left of directed edges that meet at their ends only.

    points : (n, 2) different vertices.
    start, end : (m,) vertex numbers of the edges, no two edges with the same ends.
    chain : (m,) ascending; consecutive edges of one chain follow one another, and no third edge ends
        at a vertex inside a chain.
    """
    size = len(points)
    keys = start * size + end
    by_key = np.argsort(keys)
    walk = _walk(points, start, end, chain)
    wanted = walk.start * size + walk.end
    slot = np.minimum(np.searchsorted(keys, wanted, sorter=by_key), len(keys) - 1)
    edge = by_key[slot]
    inside = np.bincount(walk.face, keys[edge] != wanted, walk.faces) == 0
    used = inside[walk.face]
    stray = np.setdiff1d(np.arange(len(keys)), edge[used])
    if len(stray):
        return Faces(edge[:0], edge[:0], 0, stray)
    order = _order(walk, edge, used)
    loop = np.cumsum(np.diff(walk.ring[order], prepend=walk.ring[order[0]]) != 0)
    return Faces(edge[order], loop, int(inside.sum()), stray)


@dataclass(frozen=True)
class _Walk:
    """The boundary edges of all bounded faces of a plane graph, each with the face on its left.

    start, end : (k,) vertex numbers.
    ring, face : (k,) number of the boundary ring and of the face each edge belongs to.
    position : (k,) place of the edge along its ring.
    length : (k,) number of edges of its ring.
    hole : (k,) whether the ring is an inner one of its face.
    faces : number of faces.
    """

    start: Indices
    end: Indices
    ring: Indices
    face: Indices
    position: Indices
    length: Indices
    hole: Mask
    faces: int


def _walk(points: Points, start: Indices, end: Indices, chain: Indices) -> _Walk:
    """All bounded faces of the plane graph that the edges form, whatever their direction."""
    last = np.append(np.flatnonzero(np.diff(chain)), len(chain) - 1)
    vertices = np.insert(start, last + 1, end[last])
    lines = shapely.linestrings(points[vertices], indices=np.insert(chain, last + 1, chain[last]))
    polygons = shapely.get_parts(shapely.polygonize(lines))
    rings, face = shapely.get_rings(polygons, return_index=True)
    hole = np.diff(face, prepend=-1) == 0
    coordinates, ring_of_vertex = shapely.get_coordinates(rings, return_index=True)
    number = _numbers(points, coordinates)
    step = np.flatnonzero(np.diff(ring_of_vertex, append=-1) == 0)
    ring = ring_of_vertex[step]
    lengths = np.bincount(ring, minlength=len(rings))
    position = np.arange(len(step)) - (np.cumsum(lengths) - lengths)[ring]
    backward = (shapely.is_ccw(rings) == hole)[ring]
    return _Walk(
        np.where(backward, number[step + 1], number[step]),
        np.where(backward, number[step], number[step + 1]),
        ring,
        face[ring],
        np.where(backward, lengths[ring] - 1 - position, position),
        lengths[ring],
        hole[ring],
        len(polygons),
    )


def _numbers(points: Points, coordinates: Points) -> Indices:
    """The numbers of vertices given by their coordinates."""
    known = points[:, 0] + 1j * points[:, 1]
    order = np.argsort(known)
    found: NDArray[np.int64] = order[np.searchsorted(known, coordinates[:, 0] + 1j * coordinates[:, 1], sorter=order)]
    return found


def _order(walk: _Walk, edge: Indices, used: Mask) -> Indices:
    """The used steps of a walk in the order that is promised by ``Faces``."""
    lowest = np.full(walk.ring.max() + 1, edge.max() + 1)
    np.minimum.at(lowest, walk.ring, edge)
    begin = np.zeros_like(lowest)
    begins = edge == lowest[walk.ring]
    begin[walk.ring[begins]] = walk.position[begins]
    rank = (walk.position - begin[walk.ring]) % walk.length
    shell = np.full(walk.face.max() + 1, 0)
    shell[walk.face[~walk.hole]] = lowest[walk.ring[~walk.hole]]
    order = np.lexsort((rank, lowest[walk.ring], walk.hole, shell[walk.face]))
    return order[used[order]]
