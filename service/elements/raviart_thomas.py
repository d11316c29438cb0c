"""Raviart-Thomas vector fields of any order in any dimension.

RT_k is spanned by polynomials of order k times the lowest-order fields (x - P) / (d |T|), P a vertex. Each such
field
carries one unit of flux out through the facet opposite P and none through the others. Hence facet functions
are facet polynomials times the facet's field, and bubbles are lambda_P q (x - P) with q of order k - 1, lambda_P
vanishing on that facet: normal traces vanish identically, not only up to rounding.
"""

from typing import Any

import numpy as np
from numpy.typing import NDArray

from service.elements.jet import Jet, coordinates, simplex_polynomials, times
from service.elements.scalar import barycentric, subsimplices


def basis(dimension: int, order: int, points: NDArray[Any]) -> tuple[NDArray[Any], NDArray[Any]]:
    """Values (n, d, q) and divergences (n, q) of the basis of RT_order at points (d, q) of the unit simplex.

    Facet functions first, facets by opposite vertex, polynomials on a facet in its vertices' ascending order.
    """
    x = coordinates(points)
    lam = barycentric(points)
    factorial = int(np.prod(range(1, dimension)))  # d |T| = 1 / (d - 1)!
    away = [[x[a] - _corner(p, a, x[a]) for a in range(dimension)] for p in range(dimension + 1)]
    fields: list[list[Jet]] = []
    for p, facet in enumerate(subsimplices(dimension, dimension)):
        for q in simplex_polynomials(order, [lam[v] for v in facet]):
            fields.append([factorial * times(q, component) for component in away[p]])
    if order >= 1:
        for p in range(dimension):
            for q in simplex_polynomials(order - 1, lam, weight=0):
                fields.append([factorial * times(lam[p], q, component) for component in away[p]])
    values = np.array([[component[0] for component in field] for field in fields])
    divergences = np.array([sum(field[a][1 + a] for a in range(dimension)) for field in fields])
    return values, divergences


def _corner(vertex: int, axis: int, like: Jet) -> Jet:
    """The constant jet of one coordinate of a vertex of the unit simplex."""
    jet = 0 * like
    if vertex == axis + 1:
        jet[0] = jet[0] + 1
    return jet
