"""Tensors on the reference simplex: all that affine elements ever need of a basis.

Local matrices on an affine cell are combinations of these tensors with a few numbers of the cell (Piola transforms).
The tensors are computed in doubles with quadrature that is exact in exact arithmetic; tests compare every entry
for every order in service with multiple-precision arithmetic, and ``REFERENCE_ERROR`` bounds the difference.
"""

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

REFERENCE_ERROR = 2.0**-43
"""|computed - exact| <= REFERENCE_ERROR sqrt(D_i D_j), D the diagonal of the mass or (summed) stiffness tensor."""


@dataclass(frozen=True)
class ScalarReference:
    """Hierarchical H1 element of one order: skeleton functions first, then bubbles.

    mass : (n, n) integrals of phi_i phi_j.
    stiffness : (d, d, n, n) integrals of d_a phi_i d_b phi_j.
    moments : (q, n) integrals of psi_l phi_j, psi an orthonormal basis of the polynomials of that order.
    skeleton : number of functions that live on the boundary of the simplex too.
    """

    order: int
    mass: Array
    stiffness: Array
    moments: Array
    skeleton: int


@dataclass(frozen=True)
class FluxReference:
    """Raviart-Thomas element of one order, arranged for equilibration.

    The functions come as facet functions (their divergence is constant), divergence-free bubbles, and bubbles whose
    divergences are psi_1, psi_2, ... of the orthonormal polynomial basis (psi_0 is constant).

    mass : (d, d, n, n) integrals of the components s_i^a s_j^b.
    divergence : (q, n) integrals of psi_l div s_j.
    facet, free : numbers of facet functions and of divergence-free bubbles.
    """

    order: int
    mass: Array
    divergence: Array
    facet: int
    free: int


def scalar_norms(dimension: int, degree: int) -> Array:
    """L2 norms of the orthogonal polynomials of the unit simplex."""
    points, weights = simplex_rule(dimension, 2 * degree)
    values = np.array([jet[0] for jet in simplex_polynomials(degree, scalar.barycentric(points))])
    return np.asarray(np.sqrt(values**2 @ weights))


def raw_orthonormal(dimension: int, degree: int, points: Array, norms: Array) -> Array:
    """Jets (q, 1 + d, n) of the orthonormal polynomials at points (d, n), given ``scalar_norms``."""
    jets = np.array(simplex_polynomials(degree, scalar.barycentric(points)))
    return np.asarray(jets / norms[:, None, None])


def orthonormal(dimension: int, degree: int, points: Array) -> Array:
    """Orthonormal polynomials on the unit simplex at points (d, n): (q, n)."""
    return raw_orthonormal(dimension, degree, points, scalar_norms(dimension, degree))[:, 0]


def scalar_tensors(dimension: int, order: int) -> tuple[Array, Array, Array]:
    """Mass, stiffness and moments of the raw scalar basis."""
    points, weights = simplex_rule(dimension, 2 * order)
    jets = np.array(scalar.basis(dimension, order, points))
    values, slopes = jets[:, 0], jets[:, 1:]
    weighted = slopes * weights
    stiffness = np.array(
        [[weighted[:, a] @ slopes[:, b].T for b in range(dimension)] for a in range(dimension)]
    )
    psi = orthonormal(dimension, order, points)
    return (values * weights) @ values.T, stiffness, (psi * weights) @ values.T


def flux_tensors(dimension: int, order: int) -> tuple[Array, Array]:
    """Mass and divergence of the raw Raviart-Thomas basis."""
    points, weights = simplex_rule(dimension, 2 * order + 2)
    values, divergences = raviart_thomas.basis(dimension, order, points)
    weighted = values * weights
    mass = np.array(
        [[weighted[:, a] @ values[:, b].T for b in range(dimension)] for a in range(dimension)]
    )
    psi = orthonormal(dimension, order, points)
    return mass, (psi * weights) @ divergences.T


def change_basis(tensor: Array, transform: Array) -> Array:
    """A bilinear tensor (..., n, n) in new functions, the columns of ``transform``."""
    return np.asarray(transform.T @ tensor @ transform)


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
def scalar_reference(dimension: int, order: int) -> ScalarReference:
    """Tensors of the scalar element of ``order`` >= 1."""
    skeleton = scalar.skeleton_size(dimension, order)
    mass, stiffness, moments = scalar_tensors(dimension, order)
    change = scalar_transform(stiffness, skeleton)
    return ScalarReference(
        order, change_basis(mass, change), change_basis(stiffness, change), moments @ change, skeleton
    )


@lru_cache(maxsize=64)
def flux_reference(dimension: int, order: int) -> FluxReference:
    """Tensors of the Raviart-Thomas element whose divergences are the polynomials of ``order`` >= 0."""
    mass, divergence = flux_tensors(dimension, order)
    facet = (dimension + 1) * simplex_dimension(dimension - 1, order)
    change, free = flux_transform(mass, divergence, facet)
    return FluxReference(order, change_basis(mass, change), divergence @ change, facet, free)
