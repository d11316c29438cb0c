"""Radial grading: triangles at a singular corner become fans of geometrically shrinking layers."""

from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from service.meshing.corners import LAYER_RATIO
from service.meshing.facets import build_facets
from service.meshing.triangulation import Triangulation

T = TypeVar("T", bound=np.generic)


def grade(mesh: Triangulation, layers: NDArray[np.int64]) -> Triangulation:
    """Replace each triangle (V, A, B) at a vertex V with n layers by 2n + 1 triangles.

    With a = A − V, b = B − V and σ = 1/4 there are new points V + σ^k a and V + σ^k b, k = 1 … n, one
    small triangle at V and n trapezoids, each cut along its shorter diagonal. Their spans are σ^{k−1}
    times combinations of a and b, formed without rounding (see ``triangulation``).

    Parameters
    ----------
    mesh : triangles no edge of which joins two vertices that have layers.
    layers : (nv,) number of layers at each vertex.
    """
    if not layers.any():
        return mesh
    place = layers[mesh.cells].argmax(axis=1)
    count = np.take_along_axis(layers[mesh.cells], place[:, None], axis=1)[:, 0]
    graded = np.flatnonzero(count)
    turn = (place[graded][:, None] + np.arange(3)) % 3
    corner = np.take_along_axis(mesh.cells[graded], turn, axis=1)
    places = np.concatenate([np.zeros((len(graded), 2, 1)), mesh.spans[graded]], axis=2)
    places = np.take_along_axis(places, turn[:, None, :], axis=2)
    a, b = places[:, :, 1] - places[:, :, 0], places[:, :, 2] - places[:, :, 0]

    rays = _Rays(mesh, layers)
    cells, spans = _fans(corner, a, b, count[graded], rays)
    boundary, part = _cut_boundary(mesh, layers, rays)
    kept = count == 0
    fans = mesh.regions[graded]
    rings = np.repeat(fans, count[graded], axis=0)
    return Triangulation(
        points=np.vstack([mesh.points, rays.points]),
        cells=np.vstack([mesh.cells[kept], cells]),
        spans=np.concatenate([mesh.spans[kept], spans]),
        shape_error=mesh.shape_error,
        boundary=boundary,
        part=part,
        regions=np.vstack([mesh.regions[kept], fans, rings, rings]),
    )


class _Rays:
    """The new points on the edges at graded vertices."""

    def __init__(self, mesh: Triangulation, layers: NDArray[np.int64]) -> None:
        ends = build_facets(np.sort(mesh.cells, axis=1)).vertices
        ends = ends[layers[ends].any(axis=1)]
        swap = layers[ends[:, 0]] == 0
        ends[swap] = ends[swap, ::-1]
        self._keys = ends[:, 0] * len(mesh.points) + ends[:, 1]
        self._order = np.argsort(self._keys)
        self._size = len(mesh.points)
        count = layers[ends[:, 0]]
        self._offset = len(mesh.points) + np.cumsum(count) - count
        self._far = ends[:, 1]
        ray = np.repeat(np.arange(len(ends)), count)
        level = np.arange(len(ray)) - np.repeat(np.cumsum(count) - count, count) + 1
        near, far = mesh.points[ends[ray, 0]], mesh.points[ends[ray, 1]]
        self.points = near + LAYER_RATIO ** level[:, None].astype(np.float64) * (far - near)

    def number(self, vertex: NDArray[np.int64], far: NDArray[np.int64], level: NDArray[np.int64]) -> NDArray[np.int64]:
        """Number of the point V + σ^level (A − V), A itself for level 0."""
        found = np.searchsorted(self._keys, vertex * self._size + far, sorter=self._order)
        return np.where(level == 0, far, self._offset[self._order[found]] + level - 1)


def _fans(
    corner: NDArray[np.int64],
    a: NDArray[np.float64],
    b: NDArray[np.float64],
    count: NDArray[np.int64],
    rays: _Rays,
) -> tuple[NDArray[np.int64], NDArray[np.float64]]:
    """Cells and spans of the fans of the triangles with rows (V, A, B) in ``corner``."""
    vertex, far_a, far_b = corner.T
    scale = LAYER_RATIO ** count.astype(np.float64)
    tips = np.column_stack([vertex, rays.number(vertex, far_a, count), rays.number(vertex, far_b, count)])
    tip_spans = np.stack([a, b], axis=2) * scale[:, None, None]

    parent = np.repeat(np.arange(len(corner)), count)
    outer = np.arange(len(parent)) - np.repeat(np.cumsum(count) - count, count)
    v, p, q = corner[parent].T
    outer_a, inner_a = rays.number(v, p, outer), rays.number(v, p, outer + 1)
    outer_b, inner_b = rays.number(v, q, outer), rays.number(v, q, outer + 1)
    # The shorter diagonal runs from inner_a to outer_b (at_a), or else from inner_b to outer_a.
    from_a, from_b = b - LAYER_RATIO * a, a - LAYER_RATIO * b
    side_a, side_b, base = (1 - LAYER_RATIO) * a, (1 - LAYER_RATIO) * b, LAYER_RATIO * (b - a)
    at_a = (from_a**2).sum(axis=1) <= (from_b**2).sum(axis=1)
    lower = np.column_stack([np.where(at_a[parent], inner_a, inner_b), outer_a, outer_b])
    upper = _choose(at_a[parent], (inner_a, outer_b, inner_b), (inner_b, inner_a, outer_a))
    lower_spans = _choose(at_a, (side_a, from_a), (from_b, side_b))
    upper_spans = _choose(at_a, (from_a, base), (-base, from_b))
    shrink = LAYER_RATIO ** outer.astype(np.float64)
    ring_spans = [spans[parent] * shrink[:, None, None] for spans in (lower_spans, upper_spans)]
    return np.vstack([tips, lower, upper]), np.concatenate([tip_spans, *ring_spans])


def _choose(first: NDArray[np.bool_], columns: tuple[NDArray[T], ...], otherwise: tuple[NDArray[T], ...]) -> NDArray[T]:
    """Arrays side by side along the last axis, from ``columns`` where ``first`` holds."""
    one, other = np.stack(columns, axis=-1), np.stack(otherwise, axis=-1)
    return np.where(first.reshape(-1, *[1] * (one.ndim - 1)), one, other)


def _cut_boundary(
    mesh: Triangulation, layers: NDArray[np.int64], rays: _Rays
) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """The boundary facets with those at graded vertices cut into n + 1 pieces."""
    count = layers[mesh.boundary].max(axis=1)
    swap = layers[mesh.boundary[:, 1]] > 0
    ordered = np.where(swap[:, None], mesh.boundary[:, ::-1], mesh.boundary)
    parent = np.repeat(np.arange(len(count)), count)
    outer = np.arange(len(parent)) - np.repeat(np.cumsum(count) - count, count)
    vertex, far = ordered[parent].T
    pieces = np.column_stack([rays.number(vertex, far, outer), rays.number(vertex, far, outer + 1)])
    last = np.flatnonzero(count)
    tips = np.column_stack([ordered[last, 0], rays.number(ordered[last, 0], ordered[last, 1], count[last])])
    kept = count == 0
    return (
        np.vstack([mesh.boundary[kept], pieces, tips]),
        np.concatenate([mesh.part[kept], mesh.part[parent], mesh.part[last]]),
    )
