"""From a plane domain to a graded mesh: the one entry to meshing."""

import numpy as np
from numpy.typing import NDArray

from service.errors import ComputationError
from service.meshing.channels import channel_sizes
from service.meshing.cover import check_cover, outline_area
from service.meshing.fill import fill, meshing_failed
from service.meshing.grade import grade
from service.meshing.mesh import Mesh
from service.meshing.outline import MOST_LAYERS, Diffusion, Outline, describe
from service.meshing.regions import check_areas, membership
from service.meshing.separate import separate
from service.meshing.sizing import SizeFunction, Subdivision, size_function, subdivide
from service.meshing.triangulation import UNIT_ROUNDOFF, Triangulation, as_mesh, base_spans
from service.meshing.vectors import cross
from service.problem.domain import PlaneDomain

_REACH = 3.0
"""A corner's elements count as no longer than so many times the size asked for there."""

_SMALLEST = 1e-13
"""Gaps and edges below this have no known shape in double precision (the diameter is about 1)."""


def mesh_domain(
    domain: PlaneDomain,
    *,
    size: float,
    target: float,
    max_cells: int = 200_000,
    diffusion: Diffusion | None = None,
    close: frozenset[int] = frozenset(),
) -> Mesh:
    """A conforming triangulation of a connected polygon, graded towards its singular points.

    Vertex i of ``domain.points`` is vertex i of the mesh. Interfaces consist of facets, so that every
    triangle lies in a region or outside. The same input gives the same bits.

    Parameters
    ----------
    domain : a connected domain whose loops are simple, disjoint and oriented as documented there.
    size : largest edge length, in mesh units (the diameter of the domain is in [1, 2)). Edges on the
        boundary keep to it, inner ones nearly so. Along narrow channels edges are shorter (see
        ``channels``) unless ``max_cells`` does not allow it.
    target : relative accuracy wanted in the eigenvalue; decides how deep the grading goes.
    max_cells : largest number of triangles allowed.
    diffusion : gives a scalar diffusion (n,), positive, in any unit, for memberships (n, R) in the
        regions; decides how singular the solution is where interfaces meet or turn. Equal everywhere
        if None.
    close : numbers of boundary parts near which elements are smaller (see ``outline``).

    Raises
    ------
    ComputationError
        ``domain-not-connected``, ``mesh-too-large`` or ``meshing-failed``, with advice.
    ValueError
        When the edges do not form closed loops, a point is not in use, the outline of a region inside
        the domain does not consist of interfaces, or a diffusion is not positive.
    """
    if domain.components != 1:
        raise ComputationError(
            "domain-not-connected",
            "The domain is not connected",
            f"The domain has {domain.components} pieces. Ask for each piece by itself.",
        )
    outline = describe(domain, size, diffusion, close)
    if outline.wanted.min() < _SMALLEST:
        raise meshing_failed("The outline touches itself, or very nearly so.")
    base, layers = _triangulate_within(outline, size, target, max_cells)
    areas = cross(base.spans[:, :, 0], base.spans[:, :, 1]) / 2
    check_areas(areas, base.regions, domain, outline.frame)
    return as_mesh(grade(base, layers), outline.frame)


def _triangulate_within(
    outline: Outline, size: float, target: float, max_cells: int
) -> tuple[Triangulation, NDArray[np.int64]]:
    """Triangles and layers; if they are too many, with flatter triangles in the channels."""
    for limit in (max_cells // 8, max_cells // 64, 0):
        narrow, narrow_sizes = channel_sizes(outline.points, outline.sides, outline.wanted, size, limit)
        points = np.vstack([outline.points, narrow])
        sizes = size_function(points, np.concatenate([outline.wanted, narrow_sizes]), size)
        try:
            return _triangulate(outline, sizes, target, max_cells)
        except ComputationError as error:
            if error.kind != "mesh-too-large" or not len(narrow):
                raise
    raise AssertionError("without points along channels there is a mesh or an error")


def _triangulate(
    outline: Outline, sizes: SizeFunction, target: float, max_cells: int
) -> tuple[Triangulation, NDArray[np.int64]]:
    """Cut the outline, fill it, and keep singular points apart: triangles, and layers at every vertex."""
    points, size, count = outline.points, sizes.size, len(outline.points)
    candidates = outline.layers(_REACH * outline.wanted, target) > 0
    least = np.where(candidates[outline.segments].all(axis=1), 2, 1).astype(np.int64)
    cut = subdivide(points, outline.segments, sizes, least)
    outer = cut.parent < len(outline.edges)
    # b boundary edges and i inner points make b − 2 + 2i triangles at least; triangles of edges up to
    # 1.5 size cover size² each.
    known = 2 * len(cut.points) - int(outer.sum()) - 2
    _check_count(max(known, int(outline_area(outline) / size**2)), max_cells)

    loops = outline.loops[cut.parent[outer]]
    every, triangles = fill(cut.points, cut.edges[outer], loops, sizes, cut.edges[~outer])
    reach = np.minimum(_longest_at(every, triangles)[:count], _REACH * outline.wanted)
    layers = np.zeros(len(every), dtype=np.int64)
    layers[:count] = outline.layers(reach, target)
    every, triangles = separate(every, triangles, layers > 0)
    layers = np.concatenate([layers, np.zeros(len(every) - len(layers), dtype=np.int64)])
    # Where interfaces meet, shallow layers are better than no mesh.
    most = MOST_LAYERS
    while (cells := len(triangles) + 2 * int(layers[triangles].sum())) > max_cells and most > 1:
        most //= 2
        layers = outline.limit_layers(layers, most)
    _check_count(cells, max_cells)

    moved = displacements(cut, points, outline.segments, len(every), outline.hosts)
    spans, error = base_spans(every, triangles, moved)
    base = Triangulation(
        points=every,
        cells=triangles,
        spans=spans,
        shape_error=error,
        boundary=cut.edges[outer],
        part=outline.part[cut.parent[outer]],
        regions=membership(every[triangles].mean(axis=1), outline.regions, outline.frame),
    )
    check_cover(base, outline, cut.edges[~outer])
    return base, layers


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
    coordinate. A point A + t(B − A) inside an edge or an interface inherits at most that of the larger end and adds
    three roundings of numbers no larger: 5u max(A, B), also for vertices placed on their ``hosts``.
    Inner vertices are where they are.
    """
    far = points[hosts].max(axis=1) if len(hosts) else points
    corners = np.where(far > points, 5, 2) * UNIT_ROUNDOFF * far
    inner = corners[edges[cut.host]].max(axis=1) + 3 * UNIT_ROUNDOFF * points[edges[cut.host]].max(axis=1)
    rest = np.zeros((count - len(cut.points), 2))
    return np.vstack([corners, inner, rest])
