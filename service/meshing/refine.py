"""Uniform refinement: every triangle into four similar ones."""

import numpy as np
from numpy.typing import NDArray

from service.meshing.facets import build_facets, find_facets
from service.meshing.mesh import Mesh


def refine(mesh: Mesh) -> Mesh:
    """Join the midpoints of the edges of every triangle; spans stay exact, parts and regions are inherited,
    and so is the field: at midpoints it is the mean.

    Old vertex i is numbered like the pair (i, i), the midpoint of i and j > i like the pair (i, j), in
    lexicographic order. Then the children of (x₀, x₁, x₂), x₀ < x₁ < x₂, are in ascending order as
    (x₀, x₀₁, x₀₂), (x₀₁, x₁, x₁₂), (x₀₂, x₁₂, x₂) with the parent's spans halved, and
    (x₀₁, x₀₂, x₁₂) with spans (b − a)/2 and b/2: J. Bey, Tetrahedral grid refinement, Computing 55
    (1995) 355–378, in two dimensions. Nothing is rounded, so ``shape_error`` is the parent's (see
    ``triangulation``).
    """
    vertex, middle = _renumber(mesh)
    x0, x1, x2 = vertex[mesh.cells].T
    x12, x02, x01 = middle[mesh.cell_facets].T
    cells = np.stack([x0, x01, x02, x01, x1, x12, x02, x12, x2, x01, x02, x12], axis=1).reshape(-1, 3)
    half = mesh.spans / 2
    inner = np.stack([half[:, :, 1] - half[:, :, 0], half[:, :, 1]], axis=2)
    spans = np.stack([half, half, half, inner], axis=1).reshape(-1, 2, 2)

    points = np.empty((len(vertex) + len(middle), 2))
    points[vertex] = mesh.points
    points[middle] = mesh.points[mesh.facets].mean(axis=1)

    nodal = np.empty((len(points) if len(mesh.nodal) else 0, mesh.nodal.shape[1]))
    if len(nodal):
        nodal[vertex] = mesh.nodal
        nodal[middle] = mesh.nodal[mesh.facets].mean(axis=1)

    facets = build_facets(cells)
    part = np.full(len(facets.vertices), -1, dtype=np.int64)
    outside = np.flatnonzero(mesh.part >= 0)
    for end in (0, 1):
        halves = np.column_stack([vertex[mesh.facets[outside, end]], middle[outside]])
        part[find_facets(facets.vertices, halves)] = mesh.part[outside]
    return Mesh(
        points=points,
        cells=cells,
        spans=spans,
        facets=facets.vertices,
        cell_facets=facets.cell_facets,
        facet_cells=facets.facet_cells,
        part=part,
        unit=mesh.unit,
        shape_error=mesh.shape_error,
        origin=mesh.origin,
        regions=np.repeat(mesh.regions, 4, axis=0),
        nodal=nodal,
    )


def _renumber(mesh: Mesh) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """New numbers of the vertices and of the midpoints of the (sorted) facets."""
    edges_before = np.searchsorted(mesh.facets[:, 0], np.arange(len(mesh.points)))
    vertex = np.arange(len(mesh.points)) + edges_before
    middle = np.arange(len(mesh.facets)) + mesh.facets[:, 0] + 1
    return vertex, middle
