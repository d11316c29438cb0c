"""The coefficient modes: polynomials on simplices given by their factors of orthogonal ones, mode 0 the mean."""

from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from service.elements.jet import simplex_dimension
from service.elements.reference import raw_orthonormal, scalar_norms
from service.elements.scalar import barycentric

Array = NDArray[np.float64]


def degree_of(dimension: int, modes: int) -> int:
    """The degree whose polynomials number ``modes`` at least."""
    degree = 0
    while simplex_dimension(dimension, degree) < modes:
        degree += 1
    return degree


@lru_cache(maxsize=64)
def control_points(dimension: int, modes: int) -> Array:
    """(c, m) Bernstein coefficients of every mode: values of a polynomial are convex combinations of its own.

    So a convex function of coefficients is nowhere larger than at the worst control point (Farouki, Comput. Aided
    Geom. Design 29 (2012)). Rounding: 1e-12 of the largest entry.
    """
    if dimension == 0 or modes == 1:
        return np.ones((1, 1))
    degree = degree_of(dimension, modes)
    grid = np.array([g for g in np.ndindex(*(degree + 1,) * dimension) if sum(g) <= degree]).T / max(degree, 1)
    lam = np.array([jet[0] for jet in barycentric(grid)])
    powers = np.rint(lam * degree).astype(int).T
    factorial = np.concatenate([[1.0], np.cumprod(np.arange(1.0, degree + 1))])
    bernstein = np.array(
        [factorial[degree] / np.prod(factorial[power]) * np.prod(lam.T**power, axis=1) for power in powers]
    )
    values = coefficient_modes(dimension, modes, grid)
    return np.asarray(np.linalg.solve(bernstein.T, values.T))


def suprema(dimension: int, modes: int) -> Array:
    """Bounds of the largest absolute values of the coefficient modes on the unit simplex."""
    return np.asarray(np.max(np.abs(control_points(dimension, modes)), axis=0) * (1 + 1e-9 * (modes > 1)))


def coefficient_modes(dimension: int, modes: int, points: Array) -> Array:
    """Values (m, n) of the coefficient modes at points (d, n) of the unit simplex."""
    degree = degree_of(dimension, modes)
    norms = scalar_norms(dimension, degree)
    return np.asarray(raw_orthonormal(dimension, degree, points, norms)[:modes, 0] * norms[0])
