"""The tensors of first-order terms against multiple-precision arithmetic (mpmath), entry by entry.

Like tests/elements/test_reference_exact.py, this check is part of the proof: ADVECTION_ERROR rests on it.
"""

from math import factorial
from typing import Any

import mpmath
import numpy as np
import pytest
from numpy.typing import NDArray

from service.bounds.infsup import CONFORMING
from service.elements import scalar
from service.elements.advection import ADVECTION_ERROR, image_reference, pairing_reference, transform_of
from service.elements.jet import simplex_dimension, simplex_polynomials
from service.elements.reference import MAX_ORDER, magnitude
from service.forms.operator import DEGREE
from tests.elements.test_reference_exact import distance, exact_rule, fixed, product

MARGIN = 2
"""The errors found must stay this far below what is allowed."""

SHIFT = 160


def raw(points: NDArray[Any], degree: int) -> NDArray[Any]:
    return np.array(simplex_polynomials(degree, scalar.barycentric(points)))


def times(left: NDArray[Any], right: NDArray[Any]) -> NDArray[Any]:
    return np.asarray((left * right) >> SHIFT)


class Exact:
    """Values at quadrature points of the plane's unit simplex and its facets, in fixed point."""

    def __init__(self, order: int, high: int, facet_high: int) -> None:
        d, exact = 2, 2 * max(high, order) + 2
        with mpmath.workdps(60):
            points, weights = exact_rule(d, exact)
            psi = raw(points, high)
            norms = np.array([mpmath.sqrt((row[0] * row[0] * weights).sum()) for row in psi])
            psi = psi / norms[:, None, None]
            phi = np.array(scalar.basis(d, order, points))
            on_facet, measure = exact_rule(d - 1, exact)
            measure = measure * factorial(d - 1)
            chi = raw(on_facet, facet_high)[:, 0]
            chi = chi / np.array([mpmath.sqrt((row * row * measure).sum()) for row in chi])[:, None]
            lam = np.vstack([1 - on_facet.sum(axis=0), on_facet])
            corners = np.hstack([np.zeros((d, 1), dtype=int), np.eye(d, dtype=int)])
            places = [np.dot(corners[:, list(facet)], lam) for facet in scalar.subsimplices(d, d)]
            self.psi, self.phi = [fixed(psi[:, a]) for a in range(3)], [fixed(phi[:, a]) for a in range(3)]
            self.modes = [fixed(norms[0] * psi[:, a]) for a in range(3)]
            self.weights, self.measure, self.chi = fixed(weights), fixed(measure), fixed(chi)
            self.phi_there = [fixed(np.array(scalar.basis(d, order, place))[:, 0]) for place in places]
            self.modes_there = [fixed(norms[0] * raw(place, high)[:, 0] / norms[:, None]) for place in places]
        self.change = fixed(transform_of(d, order))


def worst_image(order: int, degree: int) -> float:
    result, high = image_reference(2, order, degree), order + degree
    exact = Exact(order, high, high)
    found = []
    for m in range(simplex_dimension(2, degree)):
        rows = times(times(exact.psi[0], exact.modes[0][m]), exact.weights)
        for a in range(2):
            true = product(product(rows, exact.phi[1 + a].T), exact.change)
            found.append(distance(result.slopes[m, a], true) / magnitude(result.slopes)[m, a])
        true = product(product(rows, exact.phi[0].T), exact.change)
        found.append(distance(result.values[m], true) / magnitude(result.values)[m])
    for m in range(simplex_dimension(1, degree)):
        rows = times(times(exact.chi, exact.chi[m]), exact.measure)
        for face, phi in enumerate(exact.phi_there):
            true = product(product(rows, phi.T), exact.change)
            found.append(distance(result.facet[m, face], true) / magnitude(result.facet)[m, face])
    return max(float(error.max()) for error in found)


def worst_pairing(order: int, moments: int, degree: int) -> float:
    result = pairing_reference(2, order, moments, degree)
    exact = Exact(order, max(moments + 1, degree), max(moments, degree))
    count, own = simplex_dimension(2, moments + 1), simplex_dimension(1, moments)
    psi, chi = times(exact.psi[0][:count], exact.weights).T, times(exact.chi[:own], exact.measure).T
    change = exact.change.T
    found = []
    for m in range(simplex_dimension(2, degree)):
        for a in range(2):
            slope = times(exact.modes[1 + a][m], exact.phi[0]) + times(exact.modes[0][m], exact.phi[1 + a])
            true = product(change, product(-slope, psi))
            found.append(distance(result.cell[m, a], true) / magnitude(result.cell)[m, a])
        true = product(change, product(times(exact.modes[0][m], exact.phi[0]), psi))
        found.append(distance(result.values[m], true) / magnitude(result.values)[m])
        for face, (phi, modes) in enumerate(zip(exact.phi_there, exact.modes_there, strict=True)):
            true = product(change, product(times(modes[m], phi), chi))
            found.append(distance(result.trace[m, face], true) / magnitude(result.trace)[m, face])
    for m in range(simplex_dimension(1, degree)):
        for face, phi in enumerate(exact.phi_there):
            true = product(change, product(times(exact.chi[m], phi), chi))
            found.append(distance(result.facet[m, face], true) / magnitude(result.facet)[m, face])
    return max(float(error.max()) for error in found)


@pytest.mark.parametrize(("order", "degree"), [(1, 0), (2, 1), (3, 2), (4, 0)])
def test_images_of_conforming_functions(order: int, degree: int) -> None:
    assert worst_image(order, degree) <= ADVECTION_ERROR / MARGIN


@pytest.mark.parametrize("degree", range(DEGREE + 1))
def test_pairings_with_moments(degree: int) -> None:
    """All that the certificate of inf-sup asks for."""
    assert worst_pairing(CONFORMING, CONFORMING + degree, degree) <= ADVECTION_ERROR / MARGIN


@pytest.mark.slow
@pytest.mark.parametrize("degree", range(DEGREE + 1))
@pytest.mark.parametrize("order", range(5, MAX_ORDER + 1))
def test_images_of_every_order(order: int, degree: int) -> None:
    """Orders and degrees that add up to no more than the fluxes can carry."""
    if order + degree <= MAX_ORDER:
        assert worst_image(order, degree) <= ADVECTION_ERROR / MARGIN
