"""From a plane domain to a graded mesh: the one entry to meshing."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.errors import ComputationError
from service.meshing.channels import channel_sizes
from service.meshing.corners import interior_angles, layer_counts, singular_exponents
from service.meshing.fill import fill, meshing_failed
from service.meshing.grade import grade
from service.meshing.mesh import Mesh
from service.meshing.normalise import normalise, on_hosts
from service.meshing.scales import local_scales
from service.meshing.separate import separate
from service.meshing.sizing import SizeFunction, Subdivision, size_function, subdivide, vertex_sizes
from service.meshing.triangulation import UNIT_ROUNDOFF, Triangulation, as_mesh, base_spans
from service.problem.domain import PlaneDomain

_REACH = 3.0
"""A corner's elements count as no longer than so many times the size asked for there."""

_SMALLEST = 1e-13
"""Gaps and edges below this have no known shape in double precision (the diameter is about 1)."""


def mesh_domain(domain: PlaneDomain, *, size: float, target: float, max_cells: int = 200_000) -> Mesh:
    """A conforming triangulation of a connected polygon, graded towards its singular corners.

    Vertex i of ``domain.points`` is vertex i of the mesh. The same input gives the same bits.

    Parameters
    ----------
    domain : a connected domain whose loops are simple, disjoint and oriented as documented there.
    size : largest edge length, in mesh units (the diameter of the domain is in [1, 2)). Edges on the
        boundary keep to it, inner ones nearly so. Along narrow channels edges are shorter (see
        ``channels``) unless ``max_cells`` does not allow it.
    target : relative accuracy wanted in the eigenvalue; decides how deep the grading goes.
    max_cells : largest number of triangles allowed.

    Raises
    ------
    ComputationError
        ``domain-not-connected``, ``mesh-too-large`` or ``meshing-failed``, with advice.
    ValueError
        When the edges do not form closed loops through all points.
    """
    if domain.components != 1:
        raise ComputationError(
            "domain-not-connected",
            "The domain is not connected",
            f"The domain has {domain.components} pieces. Ask for each piece by itself.",
        )
    everyone = np.arange(len(domain.points))
    if not all(np.array_equal(np.sort(end), everyone) for end in domain.edges.T):
        raise ValueError("every point must start one edge and end one")
    frame = normalise(domain.points)
    points, edges = on_hosts(frame.points, domain.hosts), domain.edges
    dirichlet = np.array([part.condition == "dirichlet" for part in domain.parts])[domain.part]
    # The given points, scaled only: their differences are as exact as they can be.
    angles = interior_angles(domain.points / frame.unit, edges)
    exponents = singular_exponents(angles, edges, dirichlet)

    wanted = vertex_sizes(points, edges, size)
    if wanted.min() < _SMALLEST:
        raise meshing_failed("The outline touches itself, or very nearly so.")
    scales = local_scales(points, edges, dirichlet)
    candidates = layer_counts(exponents, _REACH * wanted / scales, target) > 0
    least = np.where(candidates[edges].all(axis=1), 2, 1).astype(np.int64)
    outline = _Outline(
        points, edges, domain.loops, domain.part, wanted, scales, exponents, least, domain.hosts
    )
    narrow, narrow_sizes = channel_sizes(points, edges, wanted, size, max_cells // 4)
    sizes = size_function(np.vstack([points, narrow]), np.concatenate([wanted, narrow_sizes]), size)
    try:
        return as_mesh(_triangulate(outline, sizes, target, max_cells, turned=len(narrow) > 0), frame)
    except ComputationError as error:
        if error.kind != "mesh-too-large" or not len(narrow):
            raise
    # Flatter triangles rather than none.
    return as_mesh(_triangulate(outline, size_function(points, wanted, size), target, max_cells), frame)


@dataclass(frozen=True)
class _Outline:
    """The boundary in mesh units, and what its vertices ask for.

    points, edges, loops, part : as in ``PlaneDomain``.
    wanted : (n,) size at each vertex.
    scales : (n,) distance over which the solution changes there.
    exponents : (n,) smallest singular exponent.
    least : (m,) least number of pieces of each edge.
    hosts : as in ``PlaneDomain``.
    """

    points: NDArray[np.float64]
    edges: NDArray[np.int64]
    loops: NDArray[np.int64]
    part: NDArray[np.int64]
    wanted: NDArray[np.float64]
    scales: NDArray[np.float64]
    exponents: NDArray[np.float64]
    least: NDArray[np.int64]
    hosts: NDArray[np.int64]


def _triangulate(
    outline: _Outline, sizes: SizeFunction, target: float, max_cells: int, turned: bool = False
) -> Triangulation:
    """Cut the boundary, fill it, and grade the corners."""
    points, edges, size = outline.points, outline.edges, sizes.size
    cut = subdivide(points, edges, sizes, outline.least)
    # k boundary edges need k − 2 triangles at least; triangles of edges up to 1.5 size cover size² each.
    _check_count(max(len(cut.edges) - 2, int(_area(points, edges) / size**2)), max_cells)

    every, triangles = fill(cut.points, cut.edges, outline.loops[cut.parent], sizes, turned)
    reach = np.minimum(_longest_at(every, triangles)[: len(points)], _REACH * outline.wanted)
    layers = np.zeros(len(every), dtype=np.int64)
    layers[: len(points)] = layer_counts(outline.exponents, reach / outline.scales, target)
    every, triangles = separate(every, triangles, layers > 0)
    layers = np.concatenate([layers, np.zeros(len(every) - len(layers), dtype=np.int64)])
    _check_count(len(triangles) + 2 * int(layers[triangles].sum()), max_cells)

    spans, error = base_spans(every, triangles, displacements(cut, points, edges, len(every), outline.hosts))
    base = Triangulation(every, triangles, spans, error, cut.edges, outline.part[cut.parent])
    _check_cover(base, points, edges, outline.loops)
    return grade(base, layers)


def _check_count(cells: int, max_cells: int) -> None:
    if cells > max_cells:
        raise ComputationError(
            "mesh-too-large",
            "The mesh would be too large",
            f"The domain needs more than {max_cells} triangles (about {cells} at least). Raise the "
            "limit, ask for a coarser tolerance, or simplify the outline.",
        )


def _longest_at(points: NDArray[np.float64], triangles: NDArray[np.int64]) -> NDArray[np.float64]:
    """Length of the longest edge at each vertex, (nv,)."""
    longest = np.zeros(len(points))
    for start, end in ((0, 1), (1, 2), (2, 0)):
        ends = triangles[:, [start, end]]
        length = np.hypot(*(points[ends[:, 1]] - points[ends[:, 0]]).T)
        np.maximum.at(longest, ends[:, 0], length)
        np.maximum.at(longest, ends[:, 1], length)
    return longest


def displacements(
    cut: Subdivision,
    points: NDArray[np.float64],
    edges: NDArray[np.int64],
    count: int,
    hosts: NDArray[np.int64],
) -> NDArray[np.float64]:
    """Bound of the distance of each base vertex to its true place, for each coordinate, (nv, 2).

    Coordinates are non-negative. A vertex of the polygon is off by one rounding, u times its
    coordinate. A point A + t(B − A) inside an edge inherits at most that of the larger end and adds
    three roundings of numbers no larger: 5u max(A, B), also for vertices placed on their ``hosts``.
    Inner vertices are where they are.
    """
    far = points[hosts].max(axis=1) if len(hosts) else points
    corners = np.where(far > points, 5, 2) * UNIT_ROUNDOFF * far
    inner = corners[edges[cut.host]].max(axis=1) + 3 * UNIT_ROUNDOFF * points[edges[cut.host]].max(axis=1)
    rest = np.zeros((count - len(cut.points), 2))
    return np.vstack([corners, inner, rest])


def _area(points: NDArray[np.float64], edges: NDArray[np.int64]) -> float:
    """Area of the polygon, holes subtracted."""
    start, end = points[edges[:, 0]], points[edges[:, 1]]
    return float((start[:, 0] * end[:, 1] - start[:, 1] * end[:, 0]).sum() / 2)


def _check_cover(
    mesh: Triangulation, points: NDArray[np.float64], edges: NDArray[np.int64], loops: NDArray[np.int64]
) -> None:
    """The triangles have the polygon's area and Euler characteristic, and no other boundary."""
    first, second = mesh.spans[:, :, 0], mesh.spans[:, :, 1]
    doubled = first[:, 0] * second[:, 1] - first[:, 1] * second[:, 0]
    area = _area(points, edges)
    length = np.hypot(*(points[edges[:, 1]] - points[edges[:, 0]]).T).sum()
    if (doubled <= 0).any() or abs(doubled.sum() / 2 - area) > 1e-12 * area + 1e-13 * length:
        raise meshing_failed("The triangles do not cover the domain exactly once.")
    vertices = len(np.unique(mesh.cells))
    facets = (3 * len(mesh.cells) + len(mesh.boundary)) / 2
    euler = vertices - facets + len(mesh.cells)
    if vertices != len(mesh.points) or euler != 2 - len(np.unique(loops)):
        raise meshing_failed("The triangles do not fit together like the domain.")
