"""Reference tensors of a hybrid element: polynomials in the cell, polynomials one order lower on its facets."""

from dataclasses import dataclass
from functools import lru_cache
from math import factorial

import numpy as np
from numpy.typing import NDArray

from service.elements.jet import simplex_polynomials
from service.elements.quadrature import simplex_rule
from service.elements.reference import raw_orthonormal, scalar_norms
from service.elements.scalar import barycentric, subsimplices

Array = NDArray[np.float64]


HYBRID_ERROR = 2.0**-46
"""Bound of each tensor's error, relative to its Frobenius norm (verified like REFERENCE_ERROR, orders 1 to 6)."""

MAX_HYBRID_ORDER = 6
"""Highest order for which the tensors are verified."""


@dataclass(frozen=True)
class HybridReference:
    """Cell polynomials psi of order k + 1 and facet polynomials chi of order k, all orthonormal.

    psi is orthonormal on the unit simplex, chi in the mean over a facet.

    stiffness : (d, d, q, q) integrals of d_a psi_i d_b psi_j.
    trace : (d+1, f, q) means over each facet of chi_i psi_j.
    slopes : (d+1, d, f, q) means over each facet of chi_i d_a psi_j.
    normals : (d+1, d) outward normals times facet measures.
    """

    order: int
    stiffness: Array
    trace: Array
    slopes: Array
    normals: Array


@lru_cache(maxsize=32)
def hybrid_reference(dimension: int, order: int) -> HybridReference:
    """Tensors for facet polynomials of ``order`` >= 0."""
    points, weights = simplex_rule(dimension, 2 * order + 2)
    norms = scalar_norms(dimension, order + 1)
    slopes = raw_orthonormal(dimension, order + 1, points, norms)[:, 1:]
    stiffness = np.array(
        [[(slopes[:, a] * weights) @ slopes[:, b].T for b in range(dimension)] for a in range(dimension)]
    )
    if dimension == 1:
        on_facet, measure = np.zeros((0, 1)), np.ones(1)
    else:
        on_facet, measure = simplex_rule(dimension - 1, 2 * order + 1)
    measure = measure * factorial(dimension - 1)
    lam = np.vstack([1 - on_facet.sum(axis=0), on_facet])
    corners = np.hstack([np.zeros((dimension, 1)), np.eye(dimension)])
    chi = np.ones((1, 1))
    if dimension > 1:
        raw = np.array([jet[0] for jet in simplex_polynomials(order, barycentric(on_facet))])
        chi = raw / np.sqrt(raw**2 @ measure)[:, None]
    traces, derivatives = [], []
    for facet in subsimplices(dimension, dimension):
        jets = raw_orthonormal(dimension, order + 1, corners[:, list(facet)] @ lam, norms)
        traces.append((chi * measure) @ jets[:, 0].T)
        derivatives.append([(chi * measure) @ jets[:, 1 + a].T for a in range(dimension)])
    normals = np.vstack([np.ones(dimension), -np.eye(dimension)]) / factorial(dimension - 1)
    return HybridReference(order, stiffness, np.array(traces), np.array(derivatives), normals)
