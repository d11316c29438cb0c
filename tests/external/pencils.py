"""Pencils with coefficients on a structured mesh of the unit square, and their proved enclosures."""

import time
from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray
from skfem import MeshTri

from service.bounds.enclosure import Enclosure
from service.bounds.refine import Budget, enclose
from service.forms.form import Pencil, constant_form
from service.meshing.facets import build_facets
from service.meshing.mesh import Mesh
from service.meshing.refine import refine
from service.meshing.triangulation import sort_vertices

Array = NDArray[np.float64]

SECONDS = 60.0
UNKNOWNS = 2_000_000


def square_mesh(size: float, stretch: float = 1.0) -> Mesh:
    """The unit square in equal right triangles with legs 2^-n, n >= 1: coordinates and spans are exact.

    The line x = 1/2 is always a line of the mesh. Edges are at most ``size`` long once y is multiplied by ``stretch``.
    """
    across = max(1, int(np.ceil(np.log2(np.sqrt(2) / size))))
    up = max(1, int(np.ceil(np.log2(np.sqrt(2) * stretch / size))))
    plain = MeshTri.init_tensor(np.linspace(0, 1, 2**across + 1), np.linspace(0, 1, 2**up + 1))
    points, cells = plain.p.T, plain.t.T.astype(np.int64)
    spans = (points[cells[:, 1:]] - points[cells[:, :1]]).swapaxes(1, 2)
    cells, spans = sort_vertices(cells, spans)
    facets = build_facets(cells)
    part = np.where(facets.facet_cells[:, 1] < 0, 0, -1)
    return Mesh(
        points=points,
        cells=cells,
        spans=spans,
        facets=facets.vertices,
        cell_facets=facets.cell_facets,
        facet_cells=facets.facet_cells,
        part=part.astype(np.int64),
        unit=1.0,
        shape_error=0.0,
    )


def boundary(mesh: Mesh) -> NDArray[np.bool_]:
    """Facets on the boundary."""
    return np.asarray(mesh.part >= 0)


def centres(mesh: Mesh) -> Array:
    """(nc, 2) centroids of the cells."""
    return np.asarray(mesh.points[mesh.cells].mean(axis=1))


def weighted(mesh: Mesh, diffusion: Array, dirichlet: NDArray[np.bool_]) -> Pencil:
    """int K grad u . grad u against int u^2, K one matrix or one for each cell."""
    return Pencil(constant_form(mesh, dirichlet, diffusion=diffusion), constant_form(mesh, dirichlet, potential=1.0))


def ratio(
    pencil_on: Callable[[Mesh], Pencil],
    index: int,
    width: float,
    mesh_at: Callable[[float], Mesh] = square_mesh,
) -> Enclosure:
    """The index-th ratio proved to the relative width within the limits of the main job."""
    budget = Budget(width, time.monotonic() + SECONDS, UNKNOWNS)
    steps = list(enclose(mesh_at, refine, pencil_on, index, budget))
    assert max(step.unknowns for step in steps) <= UNKNOWNS
    assert time.monotonic() <= budget.deadline
    found = steps[-1].enclosure
    assert found.width <= width
    return found
