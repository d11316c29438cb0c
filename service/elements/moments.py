"""Reference tensors of cell and facet moments: polynomials in the cell, one order lower on its facets."""

from dataclasses import dataclass
from functools import lru_cache
from math import factorial

import numpy as np
from numpy.typing import NDArray

from service.elements.jet import simplex_dimension, simplex_polynomials
from service.elements.quadrature import simplex_rule
from service.elements.reference import raw_orthonormal, scalar_norms
from service.elements.scalar import barycentric, subsimplices

Array = NDArray[np.float64]

MOMENT_ERROR = 2.0**-51
"""Bound of an entry's error, relative to ``magnitude`` of its tensor (verified like REFERENCE_ERROR)."""

MAX_MOMENT_ORDER = 6
"""Highest order for which the tensors are verified."""


@dataclass(frozen=True)
class MomentReference:
    """Cell polynomials psi of order k + 1 and facet polynomials chi of order k, all orthonormal.

    psi is orthonormal on the unit simplex, chi in the mean over a facet. Coefficient modes (psi~ of order up to q,
    chi~ on
    facets) are multiples of these polynomials with mode 0 the constant 1.

    stiffness : (m, d, d, n, n) integrals of psi~_m d_a psi_i d_b psi_j.
    products : (m, l, n) integrals of psi~_m psi_l psi_j, l running over the polynomials of order k + 1 + q.
    trace : (d+1, f, n) means over each facet of chi_i psi_j.
    slopes : (m, d+1, d, f, n) means over each facet of psi~_m chi_i d_a psi_j.
    facet_products : (mf, l, f) means of chi~_m chi_l chi_j, l up to order k + q.
    normals : (d+1, d) outward normals times facet measures.
    """

    order: int
    stiffness: Array
    products: Array
    trace: Array
    slopes: Array
    facet_products: Array
    normals: Array


@lru_cache(maxsize=64)
def moment_reference(dimension: int, order: int, degree: int = 0) -> MomentReference:
    """Tensors for facet polynomials of ``order`` >= 0 and coefficients of ``degree``.

    Computed in the longest floating-point type and rounded once.
    """
    d, high = dimension, order + 1 + degree
    count = simplex_dimension(d, order + 1)
    modes = simplex_dimension(d, degree)
    norms = scalar_norms(d, high, precise=True)
    unit = norms[0]  # the constant polynomial is 1, its norm the root of the volume

    def cell(points: Array) -> Array:
        return raw_orthonormal(d, high, points, norms)

    points, weights = simplex_rule(d, 2 * order + 2 + 2 * degree, precise=True)
    jets = cell(points)
    values, slopes = jets[:, 0], jets[:count, 1:]
    coefficients = unit * values[:modes]
    stiffness = np.array(
        [
            [[(slopes[:, a] * weights * mode) @ slopes[:, b].T for b in range(d)] for a in range(d)]
            for mode in coefficients
        ]
    )
    products = np.array([(values * weights * mode) @ values[:count].T for mode in coefficients])

    on_facet, measure = (
        simplex_rule(d - 1, 2 * order + 2 + 2 * degree, precise=True) if d > 1 else (np.zeros((0, 1)), np.ones(1))
    )
    measure = measure * factorial(d - 1)
    chi = np.ones((1, 1))
    if d > 1:
        raw = np.array([jet[0] for jet in simplex_polynomials(order + degree, barycentric(on_facet))])
        chi = raw / np.sqrt(raw**2 @ measure)[:, None]
    own = simplex_dimension(d - 1, order)
    facet_modes = simplex_dimension(d - 1, degree)
    facet_products = np.array([(chi * measure * mode) @ chi[:own].T for mode in chi[:facet_modes]])
    lam = np.vstack([1 - on_facet.sum(axis=0), on_facet])
    corners = np.hstack([np.zeros((d, 1)), np.eye(d)])
    traces, derivatives = [], []
    for facet in subsimplices(d, d):
        there = cell(corners[:, list(facet)] @ lam)
        traces.append((chi[:own] * measure) @ there[:count, 0].T)
        derivatives.append(
            [
                [(chi[:own] * measure * unit * mode) @ there[:count, 1 + a].T for a in range(d)]
                for mode in there[:modes, 0]
            ]
        )
    normals = np.vstack([np.ones(d), -np.eye(d)]) / factorial(d - 1)
    return MomentReference(
        order,
        stiffness.astype(float),
        products.astype(float),
        np.array(traces, dtype=float),
        np.array(derivatives, dtype=float).swapaxes(0, 1),
        facet_products.astype(float),
        normals,
    )
