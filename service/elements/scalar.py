"""Continuous piecewise polynomials of any order: vertex functions and bubbles on every subsimplex."""

from itertools import combinations
from typing import Any

from numpy.typing import NDArray

from service.elements.jet import Jet, constant, coordinates, simplex_dimension, simplex_polynomials, times


def barycentric(points: NDArray[Any]) -> list[Jet]:
    """Jets of the d + 1 barycentric coordinates of the unit simplex at points (d, n)."""
    rest = coordinates(points)
    return [constant(1, rest[0]) - sum(rest), *rest]


def subsimplices(dimension: int, size: int) -> list[tuple[int, ...]]:
    """Vertex tuples of the subsimplices with ``size`` vertices, ordered by the vertices they leave out.

    Facets so come in the order of their opposite vertices.
    """
    vertices = range(dimension + 1)
    left_out = combinations(vertices, dimension + 1 - size)
    return [tuple(v for v in vertices if v not in out) for out in left_out]


def basis(dimension: int, order: int, points: NDArray[Any]) -> list[Jet]:
    """Jets of all functions at points (d, n): vertices, edges, ..., cell.

    On each subsimplex: the product of its barycentric coordinates times orthogonal polynomials. Traces on
    a subsimplex depend only on its own vertices in ascending order, hence continuity between cells whose
    vertices are sorted.
    """
    lam = barycentric(points)
    functions = list(lam)
    for size in range(2, dimension + 2):
        if order < size:
            break
        for vertices in subsimplices(dimension, size):
            chosen = [lam[v] for v in vertices]
            bubble = times(*chosen)
            functions += [times(bubble, q) for q in simplex_polynomials(order - size, chosen, weight=1)]
    return functions


def skeleton_size(dimension: int, order: int) -> int:
    """How many functions of ``basis`` do not vanish on the boundary of the simplex."""
    bubbles = simplex_dimension(dimension, order - dimension - 1) if order > dimension else 0
    return simplex_dimension(dimension, order) - bubbles
