"""Tensors on the reference simplex: all that affine elements ever need of a basis.

Local matrices on an affine cell are combinations of these tensors with a few numbers of the cell (Piola
transforms).
The tensors are computed in the longest floating-point type with quadrature that is exact in exact arithmetic, and
rounded
once; tests compare their entries with multiple-precision arithmetic, and ``REFERENCE_ERROR`` bounds the difference.
"""

import math
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from service.elements import raviart_thomas, scalar
from service.elements.jet import simplex_dimension, simplex_polynomials
from service.elements.quadrature import simplex_rule

Array = NDArray[np.float64]

MAX_ORDER = 10
"""Highest order for which the tensors are verified."""

REFERENCE_ERROR = 2.0**-48
"""Bound of an entry's error, relative to ``magnitude`` of its tensor."""


def magnitude(tensor: Array) -> Array:
    """What the errors of a tensor's entries are measured against: their size plus a share of the largest."""
    return np.asarray(np.abs(tensor) + np.max(np.abs(tensor)) / 64)


@dataclass(frozen=True)
class ScalarReference:
    """Hierarchical H1 element of one order: skeleton functions first, then bubbles.

    Coefficient modes psi~ are the orthogonal polynomials of the unit simplex, scaled so that psi~_0 = 1.

    mass : (m, n, n) integrals of psi~_m phi_i phi_j.
    stiffness : (m, d, d, n, n) integrals of psi~_m d_a phi_i d_b phi_j.
    facet_mass : (mf, d+1, n, n) means over each facet of chi~_m phi_i phi_j, chi~ the modes of the facet.
    moments : (q, n) integrals of psi_l phi_j, psi an orthonormal basis of the polynomials of that order.
    skeleton : number of functions that live on the boundary of the simplex too.
    """

    order: int
    mass: Array
    stiffness: Array
    facet_mass: Array
    moments: Array
    skeleton: int


@dataclass(frozen=True)
class FluxReference:
    """Raviart-Thomas element of one order, arranged for equilibration.

    The functions come as facet functions (their divergence is constant), divergence-free bubbles, and bubbles whose
    divergences are psi_1, psi_2, ... of the orthonormal polynomial basis (psi_0 is constant).

    mass : (d, d, n, n) integrals of the components s_i^a s_j^b.
    divergence : (q, n) integrals of psi_l div s_j. Row 0 is psi_0 times the flow out of the cell: psi_0
        itself, correctly rounded, for the constant on each facet, and zero for all other functions.
    facet, free : numbers of facet functions and of divergence-free bubbles.
    """

    order: int
    mass: Array
    divergence: Array
    facet: int
    free: int


def scalar_norms(dimension: int, degree: int, precise: bool = False) -> Array:
    """L2 norms of the orthogonal polynomials of the unit simplex."""
    points, weights = simplex_rule(dimension, 2 * degree, precise)
    values = np.array([jet[0] for jet in simplex_polynomials(degree, scalar.barycentric(points))])
    return np.asarray(np.sqrt(values**2 @ weights))


def raw_orthonormal(dimension: int, degree: int, points: Array, norms: Array) -> Array:
    """Jets (q, 1 + d, n) of the orthonormal polynomials at points (d, n), given ``scalar_norms``."""
    jets = np.array(simplex_polynomials(degree, scalar.barycentric(points)))
    return np.asarray(jets / norms[:, None, None])


def scalar_tensors(dimension: int, order: int, degree: int) -> tuple[Array, Array, Array, Array]:
    """Mass, stiffness, facet mass and moments of the raw scalar basis."""
    d = dimension
    points, weights = simplex_rule(d, 2 * order + degree, precise=True)
    jets = np.array(scalar.basis(d, order, points))
    values, slopes = jets[:, 0], jets[:, 1:]
    norms = scalar_norms(d, max(order, degree), precise=True)
    psi = raw_orthonormal(d, max(order, degree), points, norms)[:, 0]
    modes = norms[0] * psi[: simplex_dimension(d, degree)] * weights
    mass = np.array([(values * mode) @ values.T for mode in modes])
    stiffness = np.array(
        [[[(slopes[:, a] * mode) @ slopes[:, b].T for b in range(d)] for a in range(d)] for mode in modes]
    )
    moments = (psi[: simplex_dimension(d, order)] * weights) @ values.T
    on_facet, measure, chi = facet_modes(d, degree, 2 * order + degree)
    corners = np.hstack([np.zeros((d, 1)), np.eye(d)])
    traces = [
        np.array(scalar.basis(d, order, corners[:, list(facet)] @ on_facet))[:, 0]
        for facet in scalar.subsimplices(d, d)
    ]
    facet_mass = np.array([[(trace * mode * measure) @ trace.T for trace in traces] for mode in chi])
    return mass, stiffness, facet_mass, moments


def facet_modes(dimension: int, degree: int, exact: int) -> tuple[Array, Array, Array]:
    """Barycentric points (d, n) on a facet, weights of its mean, and coefficient modes (mf, n); exact to a degree."""
    if dimension == 1:
        return np.ones((1, 1)), np.ones(1), np.ones((1, 1))
    points, weights = simplex_rule(dimension - 1, exact, precise=True)
    weights = weights * math.factorial(dimension - 1)
    raw = np.array([jet[0] for jet in simplex_polynomials(degree, scalar.barycentric(points))])
    chi = raw / np.sqrt(raw**2 @ weights)[:, None]
    return np.vstack([1 - points.sum(axis=0), points]), weights, chi


def flux_tensors(dimension: int, order: int) -> tuple[Array, Array]:
    """Mass and divergence of the raw Raviart-Thomas basis."""
    points, weights = simplex_rule(dimension, 2 * order + 2, precise=True)
    values, divergences = raviart_thomas.basis(dimension, order, points)
    weighted = values * weights
    mass = np.array([[weighted[:, a] @ values[:, b].T for b in range(dimension)] for a in range(dimension)])
    psi = raw_orthonormal(dimension, order, points, scalar_norms(dimension, order, precise=True))[:, 0]
    return mass, (psi * weights) @ divergences.T


def change_basis(tensor: Array, transform: Array) -> Array:
    """A bilinear tensor (..., n, n) in new functions, the columns of ``transform``, rounded to doubles."""
    return np.asarray(transform.T @ tensor @ transform, dtype=float)


def scalar_transform(stiffness: Array, skeleton: int) -> Array:
    """Makes the bubbles orthonormal in the energy of the reference simplex; continuity is untouched."""
    energy = np.trace(stiffness)
    transform = np.eye(len(energy))
    bubbles = slice(skeleton, None)
    if skeleton < len(energy):
        factor = np.linalg.cholesky(energy[bubbles, bubbles])
        transform[bubbles, bubbles] = np.linalg.inv(factor).T
    return transform


def flux_transform(mass: Array, divergence: Array, facet: int) -> tuple[Array, int]:
    """The arrangement of FluxReference; only bubbles are mixed into functions, so normal traces are untouched."""
    count = mass.shape[-1]
    energy = np.trace(mass)
    bubbles = np.arange(facet, count)
    inner = divergence[1:, bubbles]
    rank = len(inner)
    _, _, right = np.linalg.svd(inner)
    free = right[rank:].T
    if free.shape[1]:
        block = free.T @ energy[np.ix_(bubbles, bubbles)] @ free
        free = free @ np.linalg.inv(np.linalg.cholesky(block)).T
    sources = np.linalg.pinv(inner) if rank else np.zeros((len(bubbles), 0))
    transform = np.zeros((count, facet + free.shape[1] + rank))
    transform[:facet, :facet] = np.eye(facet)
    transform[bubbles, :facet] = -sources @ divergence[1:, :facet]
    transform[bubbles, facet : facet + free.shape[1]] = free
    transform[bubbles, facet + free.shape[1] :] = sources
    # Orthogonal to the divergence-free bubbles on the reference simplex: better conditioned local problems.
    frees = slice(facet, facet + free.shape[1])
    others = np.r_[0:facet, facet + free.shape[1] : transform.shape[1]]
    transform[:, others] -= transform[:, frees] @ (transform[:, frees].T @ energy @ transform[:, others])
    return transform, free.shape[1]


@lru_cache(maxsize=64)
def scalar_reference(dimension: int, order: int, degree: int = 0) -> ScalarReference:
    """Tensors of the scalar element of ``order`` >= 1 for coefficients of ``degree``."""
    skeleton = scalar.skeleton_size(dimension, order)
    mass, stiffness, facet_mass, moments = scalar_tensors(dimension, order, degree)
    change = scalar_transform(stiffness[0].astype(float), skeleton)
    return ScalarReference(
        order,
        change_basis(mass, change),
        change_basis(stiffness, change),
        change_basis(facet_mass, change),
        np.asarray(moments @ change, dtype=float),
        skeleton,
    )


@lru_cache(maxsize=64)
def flux_reference(dimension: int, order: int) -> FluxReference:
    """Tensors of the Raviart-Thomas element whose divergences are the polynomials of ``order`` >= 0."""
    mass, divergence = flux_tensors(dimension, order)
    facet = (dimension + 1) * simplex_dimension(dimension - 1, order)
    change, free = flux_transform(mass.astype(float), divergence.astype(float), facet)
    divergences = np.asarray(divergence @ change, dtype=float)
    divergences[0] = 0.0
    divergences[0, : facet : facet // (dimension + 1)] = math.sqrt(math.factorial(dimension))
    return FluxReference(order, change_basis(mass, change), divergences, facet, free)
