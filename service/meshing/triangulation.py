"""Counter-clockwise triangles with exact edge vectors, on the way to a ``Mesh``.

Why differences of spans are exact. The components of a base triangle's spans are rounded to multiples
of q = 2^{m−50}, where all components of its three edge vectors are at most 2^m in size, for each
coordinate by itself. Red refinement halves edge vectors and subtracts two of one triangle, which gives
the third. A radial layer multiplies by σ^k = 4^{−k} and forms ¾a and b − ¼a, multiples of q/4 up to
5·2^{m−2}, hence with at most 53 digits. So every later span is computed without any rounding.

What that is good for. Let x ↦ (I + F)x take the computed base triangle to the true one. It takes every
triangle that is cut out of it by exact rational combinations of its edges, the layers and all later
refinements, to its true counterpart too. So the bound of ‖F‖ over the base triangles holds for ever.
"""

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from service.meshing.facets import build_facets, find_facets
from service.meshing.fill import meshing_failed
from service.meshing.mesh import Mesh, no_regions
from service.meshing.normalise import Frame

UNIT_ROUNDOFF = 2.0**-53
_DIGITS = 50
_LARGEST_ERROR = 1e-3


@dataclass(frozen=True)
class Triangulation:
    """Triangles of a polygon with their true edge vectors to full relative accuracy.

    points : (nv, 2) vertices, approximate, in mesh units.
    cells : (nc, 3) vertex numbers, counter-clockwise.
    spans : (nc, 2, 2); ``spans[c, :, i]`` is the vector from the first to vertex i+1 of cell c.
    shape_error : bound of ‖F‖₂ where the true Jacobian of every cell is (I + F) times its spans.
    boundary : (nb, 2) vertex numbers of the boundary facets.
    part : (nb,) boundary part of each.
    regions : (nc, R) whether the cell lies inside each region; (nc, 0) if not given.
    """

    points: NDArray[np.float64]
    cells: NDArray[np.int64]
    spans: NDArray[np.float64]
    shape_error: float
    boundary: NDArray[np.int64]
    part: NDArray[np.int64]
    regions: NDArray[np.bool_] = field(default_factory=no_regions)

    def __post_init__(self) -> None:
        """Memberships of every cell in no region."""
        if not self.regions.size:
            object.__setattr__(self, "regions", np.empty((len(self.cells), 0), dtype=bool))


def base_spans(
    points: NDArray[np.float64], cells: NDArray[np.int64], displacement: NDArray[np.float64]
) -> tuple[NDArray[np.float64], float]:
    """Spans from differences of coordinates, rounded so that later differences are exact.

    The bound ε of ‖F‖₂. Let d_i be the error of vertex i of a triangle; then F = Σ_{i≠j} (d_i − d_j)∇λ_iᵀ
    for whichever j, λ_i the barycentric coordinates, and |∇λ_i| = (edge opposite to i)/(2 area). With
    |d_i − d_j| ≤ e, ‖F‖₂ ≤ e (sum of the two shorter edges)/(2 area). Each component of e is at most
    twice the displacement, the rounding of two differences (2^{m−53} = q/8 each) and of two roundings
    to the grid (q/2 each). The computed determinant det = a_x b_y − a_y b_x is off by at most
    2.01u(|a_x b_y| + |a_y b_x|); where that exceeds a hundredth of it the shape counts as unknown,
    otherwise five per cent more cover this and the roundings of the bound itself.

    Parameters
    ----------
    points : (nv, 2) vertices.
    cells : (nc, 3) vertex numbers, counter-clockwise.
    displacement : (nv, 2) bound of the distance of each vertex to its true place, per coordinate.

    Returns
    -------
    The spans, (nc, 2, 2), and ε.

    Raises
    ------
    ComputationError
        ``meshing-failed`` when a triangle is turned over, or so thin that double precision does not
        know its shape.
    """
    spans = (points[cells[:, 1:]] - points[cells[:, :1]]).swapaxes(1, 2)
    third = spans[:, :, 1] - spans[:, :, 0]
    largest = np.maximum(np.abs(spans).max(axis=2), np.abs(third))
    grid = np.ldexp(1.0, np.frexp(largest)[1] - _DIGITS)
    spans = np.rint(spans / grid[:, :, None]) * grid[:, :, None]

    first, second = spans[:, :, 0], spans[:, :, 1]
    plus, minus = first[:, 0] * second[:, 1], first[:, 1] * second[:, 0]
    determinant = plus - minus
    if (determinant <= 201 * UNIT_ROUNDOFF * (np.abs(plus) + np.abs(minus))).any():
        raise meshing_failed("A triangle is flat to double precision.")
    edge_error = np.hypot(*(2 * displacement[cells].max(axis=1) + 1.3 * grid).T)
    edges = np.sort([np.hypot(*edge.T) for edge in (first, second, second - first)], axis=0)
    error = 1.05 * float((edge_error * (edges[0] + edges[1]) / determinant).max())
    if error > _LARGEST_ERROR:
        raise meshing_failed("A detail is too thin for its place to be known in double precision.")
    return spans, error


def as_mesh(triangulation: Triangulation, frame: Frame) -> Mesh:
    """Sort the rows and number the facets.

    Raises
    ------
    ComputationError
        ``meshing-failed`` when the boundary facets are not the given ones.
    """
    cells, spans = sort_vertices(triangulation.cells, triangulation.spans)
    facets = build_facets(cells)
    part = np.full(len(facets.vertices), -1, dtype=np.int64)
    part[find_facets(facets.vertices, triangulation.boundary)] = triangulation.part
    if not np.array_equal(part >= 0, facets.facet_cells[:, 1] < 0):
        raise meshing_failed("The mesh does not end at the boundary.")
    return Mesh(
        points=triangulation.points,
        cells=cells,
        spans=spans,
        facets=facets.vertices,
        cell_facets=facets.cell_facets,
        facet_cells=facets.facet_cells,
        part=part,
        unit=frame.unit,
        shape_error=triangulation.shape_error,
        origin=tuple(frame.origin.tolist()),
        regions=triangulation.regions,
    )


def sort_vertices(
    cells: NDArray[np.int64], spans: NDArray[np.float64]
) -> tuple[NDArray[np.int64], NDArray[np.float64]]:
    """Put the vertex numbers of each cell in ascending order and the spans accordingly (any dimension)."""
    order = np.argsort(cells, axis=1)
    places = np.concatenate([np.zeros_like(spans[:, :, :1]), spans], axis=2)
    places = np.take_along_axis(places, order[:, None, :], axis=2)
    return np.take_along_axis(cells, order, axis=1), places[:, :, 1:] - places[:, :, :1]
