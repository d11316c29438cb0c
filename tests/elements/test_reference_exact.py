"""The reference tensors against multiple-precision arithmetic (mpmath), entry by entry.

This check is part of the proof: the allowance REFERENCE_ERROR behind every bound rests on it.
"""

from typing import Any

import mpmath
import numpy as np
import pytest
from numpy.typing import NDArray

from service.elements import raviart_thomas, reference, scalar
from service.elements.jet import simplex_dimension, simplex_polynomials
from service.elements.quadrature import conical
from service.elements.reference import MAX_ORDER, REFERENCE_ERROR

BITS = 160
"""Numbers are held as integers in units of 2^-BITS: exact products, and much faster than floats of any precision."""

MARGIN = 4
"""The errors found must stay this far below what is allowed."""


def exact_rule(dimension: int, degree: int) -> tuple[NDArray[Any], NDArray[Any]]:
    with mpmath.workdps(60):
        nodes, weights = mpmath.mp.gauss_quadrature((degree + dimension + 1) // 2, "legendre")
        interval = (
            np.array([(x + 1) / 2 for x in nodes], dtype=object),
            np.array([w / 2 for w in weights], dtype=object),
        )
        return conical(dimension, interval)


def fixed(array: NDArray[Any]) -> NDArray[Any]:
    with mpmath.workdps(60):
        scaled = [int(mpmath.nint(mpmath.ldexp(mpmath.mpf(v), BITS))) for v in array.ravel()]
    return np.array(scaled, dtype=object).reshape(array.shape)


def product(a: NDArray[Any], b: NDArray[Any]) -> NDArray[Any]:
    return np.asarray(np.dot(a, b) >> BITS)


def distance(computed: NDArray[np.float64], exact: NDArray[Any]) -> NDArray[np.float64]:
    return np.abs((fixed(computed) - exact).astype(float)) * 2.0**-BITS


def exact_orthonormal(dimension: int, order: int, points: NDArray[Any], weights: NDArray[Any]) -> NDArray[Any]:
    values = np.array([jet[0] for jet in simplex_polynomials(order, scalar.barycentric(points))])
    return np.array([row / mpmath.sqrt((row * row * weights).sum()) for row in values])


def congruence(change: NDArray[Any], tensor: NDArray[Any]) -> NDArray[Any]:
    return product(change.T, product(tensor, change))


def worst_scalar(dimension: int, order: int) -> float:
    result = reference.scalar_reference(dimension, order)
    mass, stiffness, _ = reference.scalar_tensors(dimension, order)
    change = fixed(reference.scalar_transform(stiffness, result.skeleton))
    with mpmath.workdps(60):
        points, weights = exact_rule(dimension, 2 * order)
        jets = np.array(scalar.basis(dimension, order, points))
        psi = fixed(exact_orthonormal(dimension, order, points, weights))
        measure = fixed(weights)
    rows = [fixed(jets[:, a]) for a in range(dimension + 1)]

    def integral(left: NDArray[Any], right: NDArray[Any]) -> NDArray[Any]:
        return product((left * measure) >> BITS, right.T)

    mass_scale = np.sqrt(np.diag(result.mass))
    energy_scale = np.sqrt(np.diag(np.trace(result.stiffness)))
    errors = [
        distance(result.mass, congruence(change, integral(rows[0], rows[0]))) / np.outer(mass_scale, mass_scale),
        distance(result.moments, product(integral(psi, rows[0]), change)) / mass_scale,
    ]
    for a in range(dimension):
        for b in range(dimension):
            exact = congruence(change, integral(rows[1 + a], rows[1 + b]))
            errors.append(distance(result.stiffness[a, b], exact) / np.outer(energy_scale, energy_scale))
    return max(float(error.max()) for error in errors)


def worst_flux(dimension: int, order: int) -> float:
    result = reference.flux_reference(dimension, order)
    mass, divergence = reference.flux_tensors(dimension, order)
    facet = (dimension + 1) * simplex_dimension(dimension - 1, order)
    change = fixed(reference.flux_transform(mass, divergence, facet)[0])
    with mpmath.workdps(60):
        points, weights = exact_rule(dimension, 2 * order + 2)
        values, slopes = raviart_thomas.basis(dimension, order, points)
        psi = fixed(exact_orthonormal(dimension, order, points, weights))
        measure = fixed(weights)
    components = [fixed(values[:, a]) for a in range(dimension)]

    def integral(left: NDArray[Any], right: NDArray[Any]) -> NDArray[Any]:
        return product((left * measure) >> BITS, right.T)

    scale = np.sqrt(np.diag(np.trace(result.mass)))
    size = np.linalg.norm(result.divergence, axis=0) + scale
    errors = [distance(result.divergence, product(integral(psi, fixed(slopes)), change)) / size]
    for a in range(dimension):
        for b in range(dimension):
            exact = congruence(change, integral(components[a], components[b]))
            errors.append(distance(result.mass[a, b], exact) / np.outer(scale, scale))
    return max(float(error.max()) for error in errors)


FAST = [(2, order) for order in range(1, 6)] + [(3, 1), (3, 2)]
SLOW = [(2, order) for order in range(6, MAX_ORDER + 1)]


@pytest.mark.parametrize(("dimension", "order"), FAST)
def test_tensors_are_as_exact_as_the_bounds_assume(dimension: int, order: int) -> None:
    assert worst_scalar(dimension, order) <= REFERENCE_ERROR / MARGIN
    assert worst_flux(dimension, order) <= REFERENCE_ERROR / MARGIN


@pytest.mark.slow
@pytest.mark.parametrize(("dimension", "order"), SLOW)
def test_tensors_of_high_order_are_as_exact_as_the_bounds_assume(dimension: int, order: int) -> None:
    assert worst_scalar(dimension, order) <= REFERENCE_ERROR / MARGIN
    assert worst_flux(dimension, order) <= REFERENCE_ERROR / MARGIN
