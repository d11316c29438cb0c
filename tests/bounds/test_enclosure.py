"""Enclosures: intersection, sides that swap, rounding outward; sums and units of rounding."""

import math
from fractions import Fraction

import mpmath
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.bounds.enclosure import UNKNOWN, Enclosure
from service.bounds.rounding import UNIT, down, exact_sum, gamma, up

positive = st.floats(1e-140, 1e140)
powers = st.integers(-60, 60).map(lambda n: 2.0**n)


@given(st.tuples(positive, positive).map(sorted), powers)
def test_inverse_root_rounds_outward(ends: list[float], factor: float) -> None:
    lower, upper = ends
    found = Enclosure(lower, upper, "below", "above").inverse_root(factor)
    with mpmath.workdps(60):
        assert mpmath.mpf(found.lower) < factor / mpmath.sqrt(mpmath.mpf(upper))
        assert factor / mpmath.sqrt(mpmath.mpf(lower)) < mpmath.mpf(found.upper)
    assert found.lower >= factor / math.sqrt(upper) * (1 - 1e-14)
    assert found.upper <= factor / math.sqrt(lower) * (1 + 1e-14)
    assert (found.lower_by, found.upper_by) == ("above", "below")


def test_inverse_root_of_what_is_unknown() -> None:
    assert Enclosure(-math.inf, 4.0).inverse_root().upper == math.inf
    assert Enclosure(-1.0, 4.0).inverse_root().upper == math.inf
    assert Enclosure(4.0, math.inf).inverse_root().lower == 0.0


def test_intersection_keeps_the_better_side_and_its_reason() -> None:
    first, second = Enclosure(1.0, 3.0, "a", "b"), Enclosure(2.0, 5.0, "c", "d")
    assert first.intersect(second) == second.intersect(first) == Enclosure(2.0, 3.0, "c", "b")
    assert first.intersect(UNKNOWN) == first


@given(st.tuples(positive, positive, positive).map(sorted), positive)
def test_intersection_is_never_wider_and_keeps_what_both_contain(ends: list[float], other: float) -> None:
    low, inside, high = ends
    first, second = Enclosure(low, high), Enclosure(min(inside, other), max(inside, other))
    both = first.intersect(second)
    assert both.lower <= inside <= both.upper
    assert both.width <= min(first.width, second.width)


def test_contradictions_are_errors() -> None:
    with pytest.raises(ArithmeticError):
        Enclosure(1.0, 2.0).intersect(Enclosure(2.5, 3.0))


@given(st.tuples(positive, positive).map(sorted))
def test_width_is_rounded_up(ends: list[float]) -> None:
    lower, upper = ends
    exact = (Fraction(upper) - Fraction(lower)) / Fraction(upper)
    width = Enclosure(lower, upper).width
    assert exact <= Fraction(width)
    assert Fraction(width) <= exact * (1 + Fraction(1, 10**13))


def test_width_is_unbounded_while_a_side_is_missing() -> None:
    assert UNKNOWN.width == Enclosure(1.0, math.inf).width == Enclosure(-math.inf, 1.0).width == math.inf


finite = st.floats(-1e300, 1e300, allow_subnormal=False)


@given(finite)
def test_up_and_down_move_by_whole_units(value: float) -> None:
    if abs(value) > 1e-290:
        assert math.nextafter(value, -math.inf) > down(value)
        assert math.nextafter(value, math.inf) < up(value)
    assert down(value) <= value <= up(value)


@given(st.integers(1, 10**9))
def test_gamma_is_rounded_up(operations: int) -> None:
    exact = Fraction(operations) * Fraction(UNIT)
    assert Fraction(gamma(operations)) >= exact / (1 - exact)


@given(st.lists(st.tuples(finite, finite, finite), min_size=1, max_size=30))
def test_sums_are_correctly_rounded(rows: list[tuple[float, float, float]]) -> None:
    scaled = np.array(rows) / 64
    sums = exact_sum(scaled)
    for column in range(3):
        assert sums[column] == float(sum(Fraction(x) for x in scaled[:, column]))


def test_sums_that_cancel_keep_what_is_left() -> None:
    terms = np.array([[[1e16, 1.0]], [[1.0, 1e100]], [[-1e16, -1e100]]])
    np.testing.assert_array_equal(exact_sum(terms), [[1.0, 1.0]])
