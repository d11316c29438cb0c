"""Intervals against multiple precision: they hold every value, say where there is none, and are not wide."""

import math
from fractions import Fraction
from itertools import product

import mpmath
import numpy as np
import pytest
from expression_oracles import COORDINATES, UndefinedError, examples, texts, true_value
from hypothesis import given
from hypothesis import strategies as st

from service.problem.expressions.interval import between
from service.problem.expressions.interval_algebra import IntervalAlgebra
from service.problem.expressions.parser import parse
from service.problem.expressions.readings import enclosures
from service.problem.expressions.rounding import FUNCTION_ULPS, LARGEST, SMALLEST, enclosed

ALGEBRA = IntervalAlgebra()
WIDTHS = st.sampled_from([0.0, 1e-12, 1e-3, 0.1, 1.0, 7.0])
FRACTIONS = st.one_of(st.sampled_from([0.0, 1.0]), st.floats(0, 1))

SPECIAL = [0.0, SMALLEST, -SMALLEST, 1e-310, 1.0, -1.0, 0.1, -3.0, 1 + 2**-52, 1e16, -1e200, LARGEST]
DOUBLES = st.one_of(st.sampled_from(SPECIAL), st.floats(allow_nan=False, allow_infinity=False))


def holds(box, value):
    """Whether a multiple-precision value lies in an enclosure, up to its own last digits."""
    with mpmath.workprec(300):
        slack = abs(value) * mpmath.mpf(10) ** -35
        return float(box.lower) - slack <= value <= float(box.upper) + slack


@given(texts(), COORDINATES, COORDINATES, WIDTHS, WIDTHS, FRACTIONS, FRACTIONS)
@examples(250)
def test_enclosure_holds_the_value_at_any_point_of_the_box(text, x, y, width, height, s, t):
    expression = parse(text)
    box = enclosures(expression, np.array([x, y]), np.array([x + width, y + height]))
    inside = {"x": min(x + s * width, x + width), "y": min(y + t * height, y + height)}
    assert not np.isnan(box.lower)
    assert not np.isnan(box.upper)
    try:
        value = true_value(expression, **inside)
    except UndefinedError:
        assert not box.defined
    except OverflowError:
        return
    else:
        assert not box.undefined
        assert value is None or holds(box, value)


@given(DOUBLES, DOUBLES)
@examples(250)
def test_operations_on_single_numbers_hold_the_exact_rational(a, b):
    left, right = between(np.array(a), np.array(a)), between(np.array(b), np.array(b))
    exact = {
        ALGEBRA.add: Fraction(a) + Fraction(b),
        ALGEBRA.subtract: Fraction(a) - Fraction(b),
        ALGEBRA.multiply: Fraction(a) * Fraction(b),
        ALGEBRA.divide: Fraction(a) / Fraction(b) if b else None,
    }
    for operation, value in exact.items():
        box = operation(left, right)
        if value is None:
            assert (box.lower, box.upper) == (-np.inf, np.inf)
            assert box.undefined & ~box.defined
        else:
            assert box.lower < np.inf
            assert box.lower == -np.inf or Fraction(float(box.lower)) <= value
            assert box.upper > -np.inf
            assert box.upper == np.inf or value <= Fraction(float(box.upper))
            assert box.defined
            width = float(box.upper - box.lower)
            assert math.isinf(width) or width <= 2 * math.ulp(float(box.size))


@given(DOUBLES, st.integers(-7, 12))
@examples(250)
def test_powers_of_single_numbers_hold_the_exact_rational(a, exponent):
    box = ALGEBRA.integer_power(between(np.array(a), np.array(a)), exponent)
    if a == 0 and exponent < 0:
        assert box.undefined
        return
    value = Fraction(a) ** exponent
    assert box.lower == -np.inf or Fraction(float(box.lower)) <= value
    assert box.upper == np.inf or value <= Fraction(float(box.upper))
    assert box.lower < np.inf
    assert box.defined


@given(st.fractions(), st.integers(-400, 400))
@examples(300)
def test_constants_lie_between_neighbouring_doubles(fraction, power):
    value = fraction * Fraction(10) ** power
    lower, upper = enclosed(value)
    assert lower == -np.inf or Fraction(lower) <= value
    assert upper == np.inf or value <= Fraction(upper)
    assert upper == lower or upper == math.nextafter(lower, math.inf)
    assert (lower == upper) == (np.isfinite(lower) and Fraction(lower) == value)


def random_arguments(name):
    """Arguments of every size, near multiples of pi / 2 and, for log, near 1; shape (n,)."""
    random = np.random.default_rng(20)
    signs = random.choice([-1.0, 1.0], 400)
    arguments = np.concatenate(
        [
            signs * 10.0 ** random.uniform(-320, 2, 400),
            random.uniform(-12, 12, 400),
            1 + signs * 2.0 ** -random.uniform(0, 52, 400),
        ]
    )
    if name in ("sin", "cos", "tan"):
        quarters = np.concatenate([np.arange(1, 1000), random.integers(1000, 2**25, 1000)]) * (np.pi / 2)
        # Whole numbers that come closest to a multiple of pi / 2 (numerators of its continued fraction).
        whole = [11.0, 344.0, 51819.0, 52174.0, 260515.0, 573204.0, 5419351.0, 42781604.0]
        return np.concatenate([arguments, signs * 10.0 ** random.uniform(2, 7.5, 400), quarters, whole])
    if name == "exp":
        return np.concatenate([arguments, random.uniform(-745, 709.7, 400)])
    if name == "log":
        return np.abs(np.concatenate([arguments, 10.0 ** random.uniform(-308, 308, 400)]))
    return np.concatenate([arguments, random.uniform(-30, 30, 400)])


@pytest.mark.parametrize("name", ["sin", "cos", "tan", "exp", "log", "tanh"])
def test_numpy_functions_are_as_accurate_as_assumed(name):
    arguments = random_arguments(name)
    results = getattr(np, name)(arguments)
    with mpmath.workprec(1300):
        for argument, result in zip(arguments.tolist(), results.tolist(), strict=True):
            error = abs(getattr(mpmath, name)(mpmath.mpf(argument)) - mpmath.mpf(result))
            assert error <= FUNCTION_ULPS * float(np.spacing(abs(result))), argument


@pytest.mark.parametrize("name", ["sin", "cos", "tan", "exp", "log", "tanh", "sqrt", "abs"])
def test_functions_hold_values_and_grow_by_little_more_than_their_slope(name):
    arguments = random_arguments(name)
    arguments = np.abs(arguments) if name == "sqrt" else arguments
    box = enclosures(parse(f"{name}(x)"), arguments[None], arguments[None])
    function = getattr(mpmath, "fabs" if name == "abs" else name)
    with mpmath.workprec(1300):
        for argument, lower, upper in zip(arguments.tolist(), box.lower, box.upper, strict=True):
            value = function(mpmath.mpf(argument))
            assert lower <= value <= upper, argument
            if np.isfinite(lower) and np.isfinite(upper):
                near = float(abs(value)) * 2.0**-48 + 2.0**-1069
                assert upper - lower <= near, argument


@given(st.sampled_from(["sin", "cos"]), st.floats(-50, 50), st.floats(0, 8))
@examples(400)
def test_range_of_sine_and_cosine_is_tight(name, start, width):
    box = enclosures(parse(f"{name}(x)"), np.array([start]), np.array([start + width]))
    with mpmath.workprec(200):
        function = getattr(mpmath, name)
        ends = [function(mpmath.mpf(end)) for end in (start, start + width)]
        turns = range(-40, 60)
        peaks = [mpmath.pi * k / 2 for k in turns if start <= mpmath.pi * k / 2 <= start + width]
        true = [*ends, *(function(peak) for peak in peaks)]
        assert box.lower <= min(true) + mpmath.mpf(10) ** -30
        assert box.upper >= max(true) - mpmath.mpf(10) ** -30
        assert float(min(true)) - 4e-15 <= box.lower
        assert float(max(true)) + 4e-15 >= box.upper


@pytest.mark.parametrize("argument", [5.319372648326541e255, 1e22, LARGEST, 2.0**26 + 1])
def test_sines_of_far_angles_are_not_relied_upon(argument):
    """The first is the double that comes closest to a multiple of pi / 2."""
    sine, cosine, tangent = (
        enclosures(parse(f"{name}(x)"), np.array([argument]), np.array([argument]))
        for name in ("sin", "cos", "tan")
    )
    assert (sine.lower, sine.upper, cosine.lower, cosine.upper) == (-1, 1, -1, 1)
    assert (tangent.lower, tangent.upper, bool(tangent.defined)) == (-np.inf, np.inf, False)


def test_ends_next_to_an_extremum_and_far_away():
    peaks = np.arange(1, 4001) * np.pi - np.pi / 2
    below, above = np.nextafter(peaks, -np.inf), np.nextafter(peaks, np.inf)
    box = enclosures(parse("sin(x)"), below[None], above[None])
    assert np.all(np.where(np.arange(4000) % 2 == 0, box.upper == 1, box.lower == -1))
    assert not np.any(enclosures(parse("tan(x)"), below[None], above[None]).defined)
    far = np.array([[1e17, -1e300, -np.pi, 3.0]]), np.array([[1e17, 1e300, np.pi, 3.5]])
    assert enclosures(parse("cos(x)"), *far).lower.tolist()[:3] == [-1, -1, -1]
    assert enclosures(parse("tan(x)"), *far).defined.tolist() == [False, False, False, True]


@pytest.mark.parametrize(
    ("text", "low", "high", "defined", "undefined"),
    [
        ("log(x)", 0.5, 1, True, False),
        ("log(x)", 0, 1, False, False),
        ("log(x)", -2, 0, False, True),
        ("sqrt(x)", 0, 1, True, False),
        ("sqrt(x)", -1, 1, False, False),
        ("sqrt(x)", -2, -1, False, True),
        ("1/x", 0, 1, False, False),
        ("1/x", 0, 0, False, True),
        ("1/x", 1e-300, 1, True, False),
        ("x^-2", 1e-200, 1, True, False),
        ("x^-1", -1, 1, False, False),
        ("x^0.5", 0, 1, True, False),
        ("x^1.5", -2, -1, False, True),
        ("x^0.3", 0.1, 1, True, False),
        ("x^0.3", 0, 1, False, False),
        ("x^pi", -2, -1, False, True),
        ("tan(x)", -1.5, 1.5, True, False),
        ("tan(x)", 1.5, 1.6, False, False),
        ("sqrt(x^2)", -1, 1, True, False),
        ("sqrt(x*x*x*x)", -1, 1, True, False),
        ("sqrt(abs(x)+x^2)", -1, 1, True, False),
        ("sqrt(tanh(x))", 0, 1, True, False),
        ("sin(1/x)+1", 0, 1, False, False),
        ("max(log(x), 0)", -2, -1, False, True),
        ("log(x)^0", -2, -1, False, True),
        ("exp(x)", 800, 900, True, False),
        ("1/exp(x)", -900, 900, False, False),
    ],
)
def test_where_an_expression_has_values(text, low, high, defined, undefined):
    box = enclosures(parse(text), np.array([low], dtype=float), np.array([high], dtype=float))
    assert (bool(box.defined), bool(box.undefined)) == (defined, undefined)
    assert defined or (box.lower, box.upper) == (-np.inf, np.inf)


def test_an_open_choice_has_values_if_one_branch_may_have():
    condition, nothing, one = (between(np.array(a), np.array(b)) for a, b in [(-1, 1), (-2, -1), (1, 1)])
    box = ALGEBRA.choose(condition, ALGEBRA.log(nothing), one)
    assert (bool(box.defined), bool(box.undefined)) == (False, False)
    neither = ALGEBRA.choose(condition, ALGEBRA.log(nothing), ALGEBRA.sqrt(nothing))
    assert (bool(neither.defined), bool(neither.undefined)) == (False, True)


def test_origin_of_a_distance_is_not_lost_to_rounding():
    box = enclosures(parse("sqrt((x-1)^2 + y^2)"), np.array([1.0, 0.0]), np.array([1.0, 0.0]))
    assert (box.lower, box.upper, bool(box.defined)) == (0, 0, True)


def test_sums_of_exact_numbers_are_exact():
    box = enclosures(parse("x + 0.25 - 3"), np.array([0.5]), np.array([1.0]))
    assert (box.lower, box.upper) == (-2.25, -1.75)
    assert enclosures(parse("2*0.5"), np.zeros(1), np.ones(1)).upper == 1


def test_unbounded_operands():
    whole = parse("exp(1000*x)").read(ALGEBRA, {"x": between(np.array(-1.0), np.array(1.0))})
    assert (whole.lower, whole.upper) == (0, np.inf)
    for operation, other in product((ALGEBRA.multiply, ALGEBRA.add, ALGEBRA.subtract), (0.0, 2.0, -2.0)):
        box = operation(whole, between(np.array(other), np.array(other)))
        assert box.lower < np.inf
        assert box.upper > -np.inf
        assert box.lower <= box.upper
    for other in (whole, ALGEBRA.subtract(whole, between(np.array(1.0), np.array(1.0)))):
        zero = ALGEBRA.multiply(other, between(np.array(0.0), np.array(0.0)))
        assert (zero.lower, zero.upper) == (0, 0)
    ratio = ALGEBRA.divide(whole, ALGEBRA.add(whole, between(np.array(1.0), np.array(1.0))))
    assert (ratio.lower, ratio.upper) == (0, np.inf)


def test_boxes_of_any_shape_and_constants():
    lower = np.zeros((2, 3, 4))
    box = enclosures(parse("x + y/2"), lower, lower + 1)
    assert box.lower.shape == box.defined.shape == (3, 4)
    constant = enclosures(parse("pi"), lower, lower + 1)
    assert constant.upper.shape == (3, 4)
    assert np.all((constant.lower < constant.upper) & (constant.lower == np.pi))
    with pytest.raises(KeyError, match="y"):
        enclosures(parse("x + y"), np.zeros((1, 5)), np.ones((1, 5)))


def test_enclosures_shrink_with_their_boxes():
    expression = parse("exp(-x*y)*sin(3*x)/(1 + y^2) + tanh(x - y)")
    widths = []
    for half in (1e-2, 1e-3, 1e-4):
        box = enclosures(expression, np.array([0.3, -0.8]) - half, np.array([0.3, -0.8]) + half)
        widths.append(float(box.upper - box.lower) / half)
    assert widths[0] == pytest.approx(widths[2], rel=0.05)
    assert widths[2] < 20
