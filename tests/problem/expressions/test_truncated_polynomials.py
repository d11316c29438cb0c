"""Truncated polynomials against exact rational arithmetic: every rounded or cut part is in the radius."""

from collections import Counter
from fractions import Fraction

import numpy as np
import pytest

from service.problem.expressions import truncated
from service.problem.expressions.monomials import count, exponents
from service.problem.expressions.truncated import Truncated


def random_polynomial(random, dimension, degree, cells, scale=1.0):
    """Coefficients of very different sizes, no remainder."""
    shape = (count(dimension, degree), cells)
    rows = random.normal(size=shape) * scale * 10.0 ** random.uniform(-6, 1, shape)
    return Truncated(rows, np.zeros(cells), dimension, degree)


def rational(polynomial, cell):
    """Exponents to exact coefficients on one cell."""
    powers = exponents(polynomial.dimension, polynomial.degree).tolist()
    numbers = polynomial.coefficients[:, cell].tolist()
    return Counter({tuple(power): Fraction(number) for power, number in zip(powers, numbers, strict=True)})


def largest_difference(exact, polynomial, cell):
    """A bound of |exact - polynomial| on [-1, 1]^d that is attained in a corner for some signs."""
    difference = Counter(exact)
    difference.subtract(rational(polynomial, cell))
    return sum(abs(value) for value in difference.values())


def exact_product(p, q, cell):
    """The product of two polynomials, nothing cut."""
    result = Counter()
    for a, left in rational(p, cell).items():
        for b, right in rational(q, cell).items():
            result[tuple(i + j for i, j in zip(a, b, strict=True))] += left * right
    return result


@pytest.mark.parametrize("dimension", [1, 2, 3])
@pytest.mark.parametrize("degrees", [(0, 3, 3), (1, 2, 3), (2, 2, 8), (3, 3, 3), (3, 4, 5), (4, 3, 1), (2, 5, 0)])
def test_products_lose_nothing(dimension, degrees):
    random = np.random.default_rng(sum(degrees))
    left, right, most = degrees
    p, q = (random_polynomial(random, dimension, degree, 3) for degree in (left, right))
    result = truncated.multiply(p, q, most)
    assert result.degree == min(left + right, most)
    for cell in range(3):
        exact = exact_product(p, q, cell)
        cut = sum(abs(value) for power, value in exact.items() if sum(power) > most)
        lost = largest_difference(exact, result, cell)
        assert lost <= Fraction(float(result.radius[cell]))
        sizes = Fraction(float(p.size[cell])) * Fraction(float(q.size[cell]))
        separate = sum(
            abs(a * b)
            for u, a in rational(p, cell).items()
            for v, b in rational(q, cell).items()
            if sum(u) + sum(v) > most
        )
        assert cut <= Fraction(float(result.radius[cell])) <= separate * Fraction(1.001) + sizes * Fraction(1e-13)


def test_products_add_up_the_remainders():
    """(3 +- 0.5) (2 +- 0.25) reaches 3.5 * 2.25 = 6 + 1.875."""
    p, q = (Truncated(np.array([[c]]), np.array([r]), 2, 0) for c, r in ((3.0, 0.5), (2.0, 0.25)))
    result = truncated.multiply(p, q, 4)
    assert result.coefficients.tolist() == [[6.0]]
    assert 1.875 <= result.radius[0] < 1.8751


@pytest.mark.parametrize(("first", "second"), [(0, 4), (3, 3), (5, 2)])
def test_sums_lose_nothing(first, second):
    random = np.random.default_rng(first)
    p, q = (random_polynomial(random, 2, degree, 4) for degree in (first, second))
    result = truncated.add(p, q)
    for cell in range(4):
        exact = rational(p, cell)
        exact.update(rational(q, cell))
        lost = largest_difference(exact, result, cell)
        assert lost <= Fraction(float(result.radius[cell])) < Fraction(1e-13)


def test_products_that_underflow_are_covered():
    p = Truncated(np.array([[1e-200], [3e-170]]), np.zeros(1), 1, 1)
    result = truncated.multiply(p, p, 2)
    assert largest_difference(exact_product(p, p, 0), result, 0) <= Fraction(float(result.radius[0]))


def test_one_cell_stands_for_all():
    random = np.random.default_rng(5)
    p, q = random_polynomial(random, 2, 3, 6), random_polynomial(random, 2, 1, 1)
    repeated = Truncated(np.repeat(q.coefficients, 6, axis=1), np.zeros(6), 2, 1)
    for operation in (truncated.add, lambda a, b: truncated.multiply(a, b, 4)):
        short, long = operation(p, q), operation(p, repeated)
        assert np.array_equal(short.coefficients, long.coefficients)
        assert np.array_equal(short.radius, long.radius)


def test_bounds_hold_in_corners_and_middles():
    random = np.random.default_rng(6)
    p = random_polynomial(random, 2, 4, 50)
    lower, upper = p.ends()
    points = np.array([(s, t) for s in (-1, 0, 1) for t in (-1, 0, 1)])
    monomials = np.prod(points[:, None] ** exponents(2, 4)[None], axis=2)
    reached = monomials @ p.coefficients
    assert np.all(lower <= reached.min(axis=0) + 1e-13)
    assert np.all(upper >= reached.max(axis=0) - 1e-13)
    even = Truncated(np.array([[1.0], [0.0], [0.0], [2.0], [0.0], [-3.0]]), np.array([0.25]), 2, 2)
    assert [float(end[0]) for end in even.ends()] == pytest.approx([-2.25, 3.25])


def test_what_is_not_finite_is_unknown():
    huge = Truncated(np.array([[1e200, 1.0], [1.0, 1.0], [0.0, 0.0]]), np.zeros(2), 2, 1)
    result = truncated.multiply(huge, huge, 1)
    assert result.radius[0] == np.inf
    assert result.coefficients[:, 0].tolist() == [0, 0, 0]
    assert result.radius[1] < 1.1
    unknown = truncated.widened(result, np.array([0.0, np.nan]))
    assert unknown.radius.tolist() == [np.inf, np.inf]
    again = truncated.multiply(unknown, huge, 1)
    assert again.radius.tolist() == [np.inf, np.inf]
    assert not np.any(again.coefficients)


def test_monomials_are_graded_and_nested():
    assert exponents(2, 2).tolist() == [[0, 0], [1, 0], [0, 1], [2, 0], [1, 1], [0, 2]]
    assert exponents(3, 5)[: count(3, 4)].tolist() == exponents(3, 4).tolist()
    assert [count(2, degree) for degree in range(-1, 4)] == [0, 1, 3, 6, 10]
    for dimension in (1, 2, 3):
        assert len({tuple(row) for row in exponents(dimension, 6).tolist()}) == count(dimension, 6)
