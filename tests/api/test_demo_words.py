"""Enclosures in words stay true."""

from fractions import Fraction

import hypothesis.strategies as st
from hypothesis import given

from service.demo import words


@given(st.floats(min_value=1e-300, max_value=1e300), st.floats(min_value=1e-300, max_value=1e300))
def test_printed_ends_enclose_the_computed_ones(one: float, other: float) -> None:
    lower, upper = words.rounded(min(one, other), max(one, other))
    assert Fraction(lower) <= Fraction(min(one, other))
    assert Fraction(upper) >= Fraction(max(one, other))
    assert Fraction(lower) >= Fraction(min(one, other)) * Fraction(99999, 100000)


def test_a_paragraph_has_ends_unit_and_statement() -> None:
    result = {
        "constants": {
            "friedrichs": {
                "lower": 36.79123456,
                "upper": 36.82654321,
                "relative_width": 0.00096,
                "rigour": "guaranteed",
                "unit": "m",
                "statement": "||u|| <= C ||grad u|| for every u that vanishes on inflow",
            }
        }
    }
    (paragraph,) = words.enclosures(result)
    assert "between 36.7912 and 36.8266 m" in paragraph
    assert "proved" in paragraph
    assert "0.096 %" in paragraph
    assert "vanishes on inflow" in paragraph


def test_a_constant_that_does_not_exist_is_a_sentence() -> None:
    (paragraph,) = words.enclosures(
        {"constants": {"friedrichs": {"statement": "No Friedrichs constant: ask for poincare."}}}
    )
    assert "ask for poincare" in paragraph
    assert "between" not in paragraph
