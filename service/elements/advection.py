"""Reference tensors of first-order terms: what b . grad u, c u and r u of one space are against functions of another.

Like all tensors of this folder they are computed in the longest floating-point type and rounded once;
``ADVECTION_ERROR`` bounds an entry's error relative to ``magnitude`` of its tensor, and tests verify it.
"""

from dataclasses import dataclass
from functools import lru_cache
from math import factorial

import numpy as np
from numpy.typing import NDArray

from service.elements import scalar
from service.elements.jet import simplex_dimension, simplex_polynomials
from service.elements.quadrature import simplex_rule
from service.elements.reference import raw_orthonormal, scalar_norms, scalar_tensors, scalar_transform

Array = NDArray[np.float64]

ADVECTION_ERROR = 2.0**-48
"""Bound of an entry's error, relative to ``magnitude`` of its tensor."""


@dataclass(frozen=True)
class ImageReference:
    """Conforming functions phi of one order against orthonormal polynomials psi_l of that order plus the degree.

    slopes : (m, d, l, n) integrals of psi~_m psi_l d_a phi_i.
    values : (m, l, n) integrals of psi~_m psi_l phi_i.
    facet : (mf, d+1, l, n) means over facets of chi~_m chi_l phi_i, chi orthonormal in the mean.
    """

    slopes: Array
    values: Array
    facet: Array


@dataclass(frozen=True)
class PairingReference:
    """Conforming functions phi of order j against cell polynomials psi of order k + 1 and facet polynomials chi of k.

    cell : (m, d, n, l) integrals of -psi_l d_a(psi~_m phi_i).
    values : (m, n, l) integrals of psi~_m phi_i psi_l.
    trace : (m, d+1, n, f) means over facets of psi~_m phi_i chi_f.
    facet : (mf, d+1, n, f) means over facets of chi~_m phi_i chi_f.
    """

    cell: Array
    values: Array
    trace: Array
    facet: Array


class _Tables:
    """Values of conforming functions and orthonormal polynomials at quadrature points of the cell and its facets."""

    def __init__(self, dimension: int, order: int, high: int, facet_high: int, exact: int) -> None:
        d = dimension
        norms = scalar_norms(d, high, precise=True)
        points, self.weights = simplex_rule(d, exact, precise=True)
        jets = np.array(scalar.basis(d, order, points))
        self.phi, self.slopes = jets[:, 0], jets[:, 1:]
        psi = raw_orthonormal(d, high, points, norms)
        self.psi, self.psi_slopes, self.unit = psi[:, 0], psi[:, 1:], norms[0]
        on_facet, measure = simplex_rule(d - 1, exact, precise=True) if d > 1 else (np.zeros((0, 1)), np.ones(1))
        self.measure = measure * factorial(d - 1)
        self.chi = np.ones((1, 1))
        if d > 1:
            raw = np.array([jet[0] for jet in simplex_polynomials(facet_high, scalar.barycentric(on_facet))])
            self.chi = raw / np.sqrt(raw**2 @ self.measure)[:, None]
        lam = np.vstack([1 - on_facet.sum(axis=0), on_facet])
        corners = np.hstack([np.zeros((d, 1)), np.eye(d)])
        places = [corners[:, list(facet)] @ lam for facet in scalar.subsimplices(d, d)]
        self.phi_there = [np.array(scalar.basis(d, order, place))[:, 0] for place in places]
        self.psi_there = [raw_orthonormal(d, high, place, norms)[:, 0] for place in places]


def transform_of(dimension: int, order: int) -> Array:
    """The change from raw conforming functions to those of ``scalar_reference``."""
    stiffness = scalar_tensors(dimension, order, 0)[1]
    return scalar_transform(stiffness[0].astype(float), scalar.skeleton_size(dimension, order))


@lru_cache(maxsize=64)
def image_reference(dimension: int, order: int, degree: int) -> ImageReference:
    """Tensors of conforming functions of ``order`` and coefficients of ``degree``."""
    d, high = dimension, order + degree
    table = _Tables(d, order, high, high, 2 * high)
    change = transform_of(d, order)
    modes, facet_modes = simplex_dimension(d, degree), simplex_dimension(d - 1, degree)
    weighted = [table.unit * table.psi[m] * table.weights * table.psi for m in range(modes)]
    slopes = np.array([[row @ table.slopes[:, a].T for a in range(d)] for row in weighted])
    values = np.array([row @ table.phi.T for row in weighted])
    facet = np.array(
        [[(table.chi * table.measure * table.chi[m]) @ phi.T for phi in table.phi_there] for m in range(facet_modes)]
    )
    return ImageReference(*(np.asarray(tensor @ change, dtype=float) for tensor in (slopes, values, facet)))


@lru_cache(maxsize=64)
def pairing_reference(dimension: int, order: int, moments: int, degree: int) -> PairingReference:
    """Tensors for conforming functions of ``order``, facet moments of order ``moments``, coefficients of ``degree``."""
    d = dimension
    high = max(moments + 1, degree)
    table = _Tables(d, order, high, max(moments, degree), order + degree + high)
    change = transform_of(d, order).T
    count, own = simplex_dimension(d, moments + 1), simplex_dimension(d - 1, moments)
    modes, facet_modes = simplex_dimension(d, degree), simplex_dimension(d - 1, degree)
    psi = (table.psi[:count] * table.weights).T
    mode = table.unit * table.psi
    mode_slopes = table.unit * table.psi_slopes
    cell = np.array(
        [
            [-(mode_slopes[m, a] * table.phi + mode[m] * table.slopes[:, a]) @ psi for a in range(d)]
            for m in range(modes)
        ]
    )
    values = np.array([(mode[m] * table.phi) @ psi for m in range(modes)])
    chi = (table.chi[:own] * table.measure).T
    there = list(zip(table.phi_there, table.psi_there, strict=True))
    trace = np.array([[(table.unit * psi_f[m] * phi) @ chi for phi, psi_f in there] for m in range(modes)])
    facet = np.array([[(table.chi[m] * phi) @ chi for phi in table.phi_there] for m in range(facet_modes)])
    return PairingReference(*(np.asarray(change @ tensor, dtype=float) for tensor in (cell, values, trace, facet)))
