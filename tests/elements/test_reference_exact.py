"""The reference tensors against multiple-precision arithmetic (mpmath), entry by entry.

This check is part of the proof: the allowance REFERENCE_ERROR behind every bound rests on it.
"""

from math import factorial
from typing import Any

import mpmath
import numpy as np
import pytest
from numpy.typing import NDArray

from service.elements import raviart_thomas, reference, scalar
from service.elements.jet import simplex_dimension, simplex_polynomials
from service.elements.quadrature import conical
from service.elements.reference import MAX_ORDER, REFERENCE_ERROR, magnitude

BITS = 160
"""Numbers are held as integers in units of 2^-BITS: exact products, and much faster than floats of any precision."""

MARGIN = 2
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


def exact_orthonormal(
    dimension: int, order: int, points: NDArray[Any], rule_points: NDArray[Any], weights: NDArray[Any]
) -> NDArray[Any]:
    def raw(where: NDArray[Any]) -> NDArray[Any]:
        return np.array([jet[0] for jet in simplex_polynomials(order, scalar.barycentric(where))])

    norms = [mpmath.sqrt((row * row * weights).sum()) for row in raw(rule_points)]
    return np.array([row / norm for row, norm in zip(raw(points), norms, strict=True)])


def congruence(change: NDArray[Any], tensor: NDArray[Any]) -> NDArray[Any]:
    return product(change.T, product(tensor, change))


def worst_scalar(dimension: int, order: int, degree: int = 0) -> float:
    d = dimension
    result = reference.scalar_reference(d, order, degree)
    raw = reference.scalar_tensors(d, order, degree)
    change = fixed(reference.scalar_transform(raw[1][0].astype(float), result.skeleton))
    with mpmath.workdps(60):
        points, weights = exact_rule(d, 2 * order + degree)
        jets = np.array(scalar.basis(d, order, points))
        psi = exact_orthonormal(d, max(order, degree), points, *exact_rule(d, 2 * max(order, degree)))
        unit = 1 / psi[0, 0]
        measures = [fixed(unit * mode * weights) for mode in psi[: simplex_dimension(d, degree)]]
        plain, psi_rows = fixed(weights), fixed(psi[: simplex_dimension(d, order)])
        on_facet, facet_weights = exact_rule(d - 1, 2 * order + degree)
        facet_weights = facet_weights * factorial(d - 1)
        chi = np.array([jet[0] for jet in simplex_polynomials(degree, scalar.barycentric(on_facet))])
        chi = np.array([row / mpmath.sqrt((row * row * facet_weights).sum()) for row in chi])
        chi_measures = [fixed(mode * facet_weights) for mode in chi]
        lam = np.vstack([1 - on_facet.sum(axis=0), on_facet])
        corners = np.hstack([np.zeros((d, 1), dtype=int), np.eye(d, dtype=int)])
        traces = [
            fixed(np.array(scalar.basis(d, order, np.dot(corners[:, list(facet)], lam)))[:, 0])
            for facet in scalar.subsimplices(d, d)
        ]
    rows = [fixed(jets[:, a]) for a in range(d + 1)]

    def integral(left: NDArray[Any], measure: NDArray[Any], right: NDArray[Any]) -> NDArray[Any]:
        return product((left * measure) >> BITS, right.T)

    errors = []
    for m, measure in enumerate(measures):
        errors.append((result.mass, m, congruence(change, integral(rows[0], measure, rows[0]))))
    found = [distance(t[m], exact) / magnitude(t)[m] for t, m, exact in errors]
    found.append(
        distance(result.moments, product(integral(psi_rows, plain, rows[0]), change)) / magnitude(result.moments)
    )
    for m, measure in enumerate(measures):
        for a in range(d):
            for b in range(d):
                exact = congruence(change, integral(rows[1 + a], measure, rows[1 + b]))
                found.append(distance(result.stiffness[m, a, b], exact) / magnitude(result.stiffness)[m, a, b])
    for m, measure in enumerate(chi_measures):
        for face, trace in enumerate(traces):
            exact = congruence(change, integral(trace, measure, trace))
            found.append(distance(result.facet_mass[m, face], exact) / magnitude(result.facet_mass)[m, face])
    return max(float(error.max()) for error in found)


def worst_flux(dimension: int, order: int) -> float:
    result = reference.flux_reference(dimension, order)
    mass, divergence = reference.flux_tensors(dimension, order)
    facet = (dimension + 1) * simplex_dimension(dimension - 1, order)
    change = fixed(reference.flux_transform(mass.astype(float), divergence.astype(float), facet)[0])
    with mpmath.workdps(60):
        points, weights = exact_rule(dimension, 2 * order + 2)
        values, slopes = raviart_thomas.basis(dimension, order, points)
        psi = fixed(exact_orthonormal(dimension, order, points, *exact_rule(dimension, 2 * order)))
        measure = fixed(weights)
    components = [fixed(values[:, a]) for a in range(dimension)]

    def integral(left: NDArray[Any], right: NDArray[Any]) -> NDArray[Any]:
        return product((left * measure) >> BITS, right.T)

    exact_divergence = product(integral(psi, fixed(slopes)), change)
    # The flow out of the cell is claimed to the last digit.
    flow = distance(result.divergence[0], exact_divergence[0])
    assert float(flow.max()) <= 2.0**-53 * result.divergence[0].max()
    assert np.count_nonzero(result.divergence[0]) == dimension + 1
    errors = [distance(result.divergence, exact_divergence) / magnitude(result.divergence)]
    for a in range(dimension):
        for b in range(dimension):
            exact = congruence(change, integral(components[a], components[b]))
            errors.append(distance(result.mass[a, b], exact) / magnitude(result.mass)[a, b])
    return max(float(error.max()) for error in errors)


FAST = [(2, order) for order in range(1, 6)] + [(3, 1), (3, 2)]
SLOW = [(2, order) for order in range(6, MAX_ORDER + 1)]


@pytest.mark.parametrize(("dimension", "order"), FAST)
def test_tensors_are_as_exact_as_the_bounds_assume(dimension: int, order: int) -> None:
    assert worst_scalar(dimension, order) <= REFERENCE_ERROR / MARGIN
    assert worst_flux(dimension, order) <= REFERENCE_ERROR / MARGIN


@pytest.mark.parametrize(("order", "degree"), [(2, 1), (3, 2), (4, 3)])
def test_tensors_with_coefficients_are_as_exact_as_the_bounds_assume(order: int, degree: int) -> None:
    assert worst_scalar(2, order, degree) <= REFERENCE_ERROR / MARGIN


@pytest.mark.slow
@pytest.mark.parametrize(("dimension", "order"), SLOW)
def test_tensors_of_high_order_are_as_exact_as_the_bounds_assume(dimension: int, order: int) -> None:
    assert worst_scalar(dimension, order) <= REFERENCE_ERROR / MARGIN
    assert worst_flux(dimension, order) <= REFERENCE_ERROR / MARGIN
