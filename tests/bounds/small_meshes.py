"""Small meshes whose coordinates are exact, and random ones."""

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import Delaunay
from skfem import MeshTri

from service.meshing.facets import build_facets
from service.meshing.mesh import Mesh
from service.meshing.triangulation import sort_vertices

Array = NDArray[np.float64]


def mesh_of(points: Array, cells: NDArray[np.int64]) -> Mesh:
    """A mesh with one boundary part from vertices whose differences are exact in doubles."""
    points, cells = np.asarray(points, dtype=float), np.asarray(cells, dtype=np.int64)
    spans = (points[cells[:, 1:]] - points[cells[:, :1]]).swapaxes(1, 2)
    cells, spans = sort_vertices(cells, spans)
    facets = build_facets(cells)
    return Mesh(
        points=points,
        cells=cells,
        spans=spans,
        facets=facets.vertices,
        cell_facets=facets.cell_facets,
        facet_cells=facets.facet_cells,
        part=np.where(facets.facet_cells[:, 1] < 0, 0, -1).astype(np.int64),
        unit=1.0,
        shape_error=0.0,
    )


def triangle(corners: Sequence[Sequence[float]]) -> Mesh:
    """One cell."""
    return mesh_of(np.array(corners, dtype=float), np.array([[0, 1, 2]]))


def square(count: int) -> Mesh:
    """The unit square in 2 count^2 right triangles, count a power of two."""
    plain = MeshTri.init_tensor(np.linspace(0, 1, count + 1), np.linspace(0, 1, count + 1))
    return mesh_of(plain.p.T, plain.t.T)


def random_square(inside: int, seed: int, edge: int = 3) -> Mesh:
    """The unit square, triangulated from random vertices inside and equal parts of its sides; no two cells alike."""
    random = np.random.default_rng(seed)
    side = np.arange(edge + 1) / edge
    rim = [np.column_stack([side, 0 * side]), np.column_stack([side, 0 * side + 1])]
    rim += [np.column_stack([0 * side[1:-1], side[1:-1]]), np.column_stack([0 * side[1:-1] + 1, side[1:-1]])]
    within = 0.1 + 0.8 * random.random((inside, 2))
    points = np.round(np.vstack([*rim, within]) * 2**20) / 2**20
    return mesh_of(points, Delaunay(points).simplices)


def random_triangles(count: int, seed: int) -> list[Mesh]:
    """Single triangles of all sizes and shapes, down to a thousandth as high as long."""
    random = np.random.default_rng(seed)
    found = []
    for _ in range(count):
        size, height = 2.0 ** random.integers(-8, 9), 10.0 ** random.uniform(-3, 0)
        foot, turn = random.uniform(-0.2, 1.2), random.uniform(0, 2 * np.pi)
        rotation = np.array([[np.cos(turn), -np.sin(turn)], [np.sin(turn), np.cos(turn)]])
        corners = size * np.array([[0, 0], [1, 0], [foot, height]]) @ rotation.T
        found.append(triangle(corners[random.permutation(3)]))
    return found


def everywhere(mesh: Mesh) -> NDArray[np.bool_]:
    """Zero on the whole boundary."""
    return np.asarray(mesh.part >= 0)


def nowhere(mesh: Mesh) -> NDArray[np.bool_]:
    """Free."""
    return np.zeros(len(mesh.facets), dtype=bool)


def square_ratios(count: int, held: bool) -> Array:
    """The smallest ratios of the unit square: pi^2 (i^2 + j^2), i and j from 1 if held all round, from 0 if free."""
    numbers = np.arange(1 if held else 0, count + 2)
    return np.pi**2 * np.sort((numbers[:, None] ** 2 + numbers**2).ravel())[:count]
