"""The tensors behind the counting bounds against multiple-precision arithmetic (mpmath), entry by entry.

Like tests/elements/test_reference_exact.py, this check is part of the proof: MOMENT_ERROR rests on it.
"""

from math import factorial
from typing import Any

import mpmath
import numpy as np
import pytest
from numpy.typing import NDArray

from service.elements import scalar
from service.elements.jet import simplex_dimension, simplex_polynomials
from service.elements.moments import MOMENT_ERROR, moment_reference
from service.elements.reference import magnitude
from tests.elements.test_reference_exact import distance, exact_rule, fixed, product

MARGIN = 2
"""The errors found must stay this far below what is allowed."""


def raw(points: NDArray[Any], degree: int) -> NDArray[Any]:
    return np.array(simplex_polynomials(degree, scalar.barycentric(points)))


def worst(dimension: int, order: int, degree: int) -> float:
    reference = moment_reference(dimension, order, degree)
    high, d = order + 1 + degree, dimension
    count, modes = simplex_dimension(d, order + 1), simplex_dimension(d, degree)
    with mpmath.workdps(60):
        points, weights = exact_rule(d, 2 * high)
        jets = raw(points, high)
        norms = np.array([mpmath.sqrt((row[0] * row[0] * weights).sum()) for row in jets])
        jets = jets / norms[:, None, None]
        on_facet, measure = exact_rule(d - 1, 2 * high)
        measure = measure * factorial(d - 1)
        chi = raw(on_facet, order + degree)[:, 0]
        chi = chi / np.array([mpmath.sqrt((row * row * measure).sum()) for row in chi])[:, None]
        lam = np.vstack([1 - on_facet.sum(axis=0), on_facet])
        corners = np.hstack([np.zeros((d, 1), dtype=int), np.eye(d, dtype=int)])
        there = [
            raw(np.dot(corners[:, list(facet)], lam), high) / norms[:, None, None]
            for facet in scalar.subsimplices(d, d)
        ]
        mode_values = [norms[0] * jets[m, 0] for m in range(modes)]
        weighted = [fixed(mode * weights) for mode in mode_values]
        facet_weighted = [[fixed(norms[0] * values[m, 0] * measure) for m in range(modes)] for values in there]
        chi_weighted = [fixed(row * measure) for row in chi[: simplex_dimension(d - 1, degree)]]
        plain = fixed(measure)
        cell_rows = [fixed(jets[:, a]) for a in range(d + 1)]
        facet_rows = [[fixed(values[:count, a]) for a in range(d + 1)] for values in there]
        chi_rows = fixed(chi)
    shift = 160

    def integral(left: NDArray[Any], weight: NDArray[Any], right: NDArray[Any]) -> NDArray[Any]:
        return product((left * weight) >> shift, right.T)

    own = simplex_dimension(d - 1, order)
    stiffness = np.array(
        [
            [
                [integral(cell_rows[1 + a][:count], weight, cell_rows[1 + b][:count]) for b in range(d)]
                for a in range(d)
            ]
            for weight in weighted
        ]
    )
    products = np.array([integral(cell_rows[0], weight, cell_rows[0][:count]) for weight in weighted])
    trace = np.array([integral(chi_rows[:own], plain, rows[0]) for rows in facet_rows])
    slopes = np.array(
        [
            [
                [integral(chi_rows[:own], weights_there[m], rows[1 + a]) for a in range(d)]
                for rows, weights_there in zip(facet_rows, facet_weighted, strict=True)
            ]
            for m in range(modes)
        ]
    )
    facet_products = np.array([integral(chi_rows, weight, chi_rows[:own]) for weight in chi_weighted])
    pairs = [
        (reference.stiffness, stiffness),
        (reference.products, products),
        (reference.trace, trace),
        (reference.slopes, slopes),
        (reference.facet_products, facet_products),
    ]
    return max(float((distance(mine, exact) / magnitude(mine)).max()) for mine, exact in pairs)


@pytest.mark.parametrize(("order", "degree"), [(1, 0), (2, 0), (3, 0), (2, 1), (2, 2), (3, 2)])
def test_moment_tensors_are_as_exact_as_the_bounds_assume(order: int, degree: int) -> None:
    assert worst(2, order, degree) <= MOMENT_ERROR / MARGIN
