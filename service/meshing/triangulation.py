"""Counter-clockwise triangles with exact edge vectors, on the way to a ``Mesh``.

Why differences of spans are exact. The components of a base triangle's spans are rounded to multiples
of q = 2^{m−50}, where all components of its three edge vectors are below 2^m in size, for each
coordinate by itself. Red refinement halves edge vectors and subtracts two of one triangle, which gives
the third. A radial layer multiplies by σ^k = 4^{−k} and forms ¾a and b − ¼a, multiples of q/4 below
5·2^{m−2}, hence with at most 53 digits. So every later span is computed without any rounding.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.meshing.facets import build_facets, find_facets
from service.meshing.fill import meshing_failed
from service.meshing.mesh import Mesh
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
    edge_error : (nc, 2) bound, for each coordinate, of the error of the three edge vectors.
    boundary : (nb, 2) vertex numbers of the boundary facets.
    part : (nb,) boundary part of each.
    """

    points: NDArray[np.float64]
    cells: NDArray[np.int64]
    spans: NDArray[np.float64]
    edge_error: NDArray[np.float64]
    boundary: NDArray[np.int64]
    part: NDArray[np.int64]


def base_spans(
    points: NDArray[np.float64], cells: NDArray[np.int64], displacement: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Spans from differences of coordinates, rounded so that later differences are exact.

    Parameters
    ----------
    points : (nv, 2) vertices.
    cells : (nc, 3) vertex numbers.
    displacement : (nv, 2) bound of the distance of each vertex to its true place, per coordinate.

    Returns
    -------
    The spans, (nc, 2, 2), and the bound of the error of all three edge vectors per coordinate, (nc, 2):
    twice the displacement, the rounding of two differences (at most 2^{m−53} = q/8 each) and of two
    roundings to the grid (q/2 each).
    """
    spans = (points[cells[:, 1:]] - points[cells[:, :1]]).swapaxes(1, 2)
    third = spans[:, :, 1] - spans[:, :, 0]
    largest = np.maximum(np.abs(spans).max(axis=2), np.abs(third))
    grid = np.ldexp(1.0, np.frexp(largest)[1] - _DIGITS)
    error = 2 * displacement[cells].max(axis=1) + 1.3 * grid
    return np.rint(spans / grid[:, :, None]) * grid[:, :, None], error


def shape_error(spans: NDArray[np.float64], edge_error: NDArray[np.float64]) -> float:
    """Bound of ‖F‖₂ where the true Jacobian is S(I + F), S the spans, whatever vertex comes first.

    With E the error of the spans, F = S⁻¹E, and the rows of S⁻¹ are gradients ∇λ_i of barycentric
    coordinates; so |F_ij| ≤ |∇λ_i|·e with e the edge error, and ‖F‖₂ ≤ ‖F‖_F ≤
    √2 (Σ_i (|∇λ_i|·e)²)^{1/2}, summed over all three i, which covers every numbering of the vertices.
    ∇λ_i is the opposite edge turned by a right angle over det S. The determinant is computed with an
    error of at most 2.01u(|a_x b_y| + |a_y b_x|); where that exceeds a hundredth of it the shape is
    unknown, otherwise 5 per cent cover this and all other rounding.

    The bound stays valid for the children of a red refinement: their S and E are products of those of
    the parent with the same matrix, their edges are halves of the parent's edges, and so is their e.

    Parameters
    ----------
    spans : (nc, 2, 2).
    edge_error : (nc, 2) bound for each coordinate of the errors of all three edge vectors.

    Raises
    ------
    ComputationError
        ``meshing-failed`` when a triangle is so thin that double precision does not know its shape.
    """
    first, second = spans[:, :, 0], spans[:, :, 1]
    plus, minus = first[:, 0] * second[:, 1], first[:, 1] * second[:, 0]
    determinant = plus - minus
    if (determinant <= 300 * UNIT_ROUNDOFF * (np.abs(plus) + np.abs(minus))).any():
        raise meshing_failed("A triangle is flat to double precision.")
    opposite = np.abs(np.stack([first, second, second - first], axis=1))
    slopes = (opposite * edge_error[:, None, ::-1]).sum(axis=2) / determinant[:, None]
    error = 1.05 * np.sqrt(2 * (slopes**2).sum(axis=1)).max()
    if error > _LARGEST_ERROR:
        raise meshing_failed("A detail is too small to be known in double precision at its distance.")
    return float(error)


def as_mesh(triangulation: Triangulation, frame: Frame) -> Mesh:
    """Sort the rows, number the facets and bound the shape error.

    Raises
    ------
    ComputationError
        ``meshing-failed`` when the boundary facets are not the given ones, or by ``shape_error``.
    """
    error = shape_error(triangulation.spans, triangulation.edge_error)
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
        shape_error=error,
    )


def sort_vertices(
    cells: NDArray[np.int64], spans: NDArray[np.float64]
) -> tuple[NDArray[np.int64], NDArray[np.float64]]:
    """Put the vertex numbers of each cell in ascending order and the spans accordingly (any dimension)."""
    order = np.argsort(cells, axis=1)
    places = np.concatenate([np.zeros_like(spans[:, :, :1]), spans], axis=2)
    places = np.take_along_axis(places, order[:, None, :], axis=2)
    return np.take_along_axis(cells, order, axis=1), places[:, :, 1:] - places[:, :, :1]
