"""Taylor models against multiple precision: the remainder holds, shrinks as it should, and is never lost."""

import time
from fractions import Fraction
from itertools import product

import mpmath
import numpy as np
import pytest
from expression_oracles import UndefinedError, examples, texts, true_value
from hypothesis import given
from hypothesis import strategies as st

from service.problem.expressions.parser import parse
from service.problem.expressions.readings import enclosures, taylor_models, values
from service.problem.expressions.taylor_algebra import TaylorAlgebra
from service.problem.expressions.taylor_model import evaluate, range_bounds

DEGREES = st.integers(0, 6)
CENTERS = st.one_of(st.floats(-3, 3, allow_subnormal=False), st.integers(-2, 2).map(float))
HALVES = st.sampled_from([0.0, 1e-9, 1e-2, 0.3, 1.0, 2.5])
LOCALS = st.one_of(st.sampled_from([-1.0, 0.0, 1.0]), st.floats(-1, 1, allow_subnormal=False))

SMOOTH = [
    "1 + x^2 + 0.5*sin(3*y)",
    "cos(x - 2*y)",
    "tan(x/2 + y/3)",
    "exp(x*y)",
    "log(2 + x + y^2)",
    "sqrt(2 + x*y)",
    "tanh(2*x - y)",
    "1/(2 + x + y)",
    "x/(3 - y)^2",
    "(2 + x)^1.5*(2 + y)^-0.7",
    "(2 + y)^x",
]


def exact_polynomial(model, cell, local):
    """The polynomial of one cell at a point, without rounding."""
    total = Fraction(0)
    for powers, coefficient in zip(model.exponents.tolist(), model.coefficients[cell].tolist(), strict=True):
        term = Fraction(coefficient)
        for base, power in zip(local, powers, strict=True):
            term *= Fraction(base) ** power
        total += term
    return total


def in_remainder(model, cell, local, value):
    """Whether a multiple-precision value is within the radius of the polynomial, up to its last digits."""
    with mpmath.workprec(300):
        exact = exact_polynomial(model, cell, local)
        distance = abs(value - mpmath.mpf(exact.numerator) / exact.denominator)
        return distance <= float(model.radius[cell]) + abs(value) * mpmath.mpf(10) ** -35


def true_coordinates(center, half, local):
    """Centre + half width * local coordinate without rounding, for x and y."""
    with mpmath.workprec(900):
        names = zip("xy", center, half, local, strict=True)
        return {name: mpmath.mpf(c) + mpmath.mpf(h) * mpmath.mpf(s) for name, c, h, s in names}


@given(texts(), st.tuples(CENTERS, CENTERS), st.tuples(HALVES, HALVES), st.tuples(LOCALS, LOCALS), DEGREES)
@examples(250)
def test_model_holds_the_value_at_any_point_of_the_cell(text, center, half, local, degree):
    expression = parse(text)
    model = taylor_models(expression, np.array(center)[:, None], np.array(half)[:, None], degree)
    bounds = range_bounds(model)
    assert np.all(np.isfinite(model.coefficients))
    assert np.all(model.radius >= 0)
    try:
        value = true_value(expression, **true_coordinates(center, half, local))
    except UndefinedError:
        assert not model.bounds.defined[0]
    except OverflowError:
        return
    else:
        assert not model.bounds.undefined[0]
        if value is not None:
            assert in_remainder(model, 0, local, value)
            slack = abs(value) * mpmath.mpf(10) ** -35
            assert bounds.lower[0] - slack <= value <= bounds.upper[0] + slack


@pytest.mark.parametrize("text", SMOOTH)
@pytest.mark.parametrize("degree", range(9))
def test_models_of_smooth_functions_hold_on_many_points(text, degree):
    expression = parse(text)
    random = np.random.default_rng(degree)
    center, half = random.uniform(-0.5, 0.5, (2, 6)), random.uniform(0.01, 0.4, (2, 6))
    model = taylor_models(expression, center, half, degree)
    assert np.all(np.isfinite(model.radius))
    for cell in range(6):
        for local in random.uniform(-1, 1, (4, 2)):
            coordinates = true_coordinates(center[:, cell], half[:, cell], local)
            assert in_remainder(model, cell, local.tolist(), true_value(expression, **coordinates))


@pytest.mark.parametrize("text", SMOOTH)
@pytest.mark.parametrize("degree", range(7))
def test_remainder_shrinks_like_the_first_power_left_out(text, degree):
    expression = parse(text)
    center = np.array([[0.21, -0.4], [0.13, 0.37]])
    radii = []
    for step in range(12):
        half = np.full((2, 2), 0.1 / 2**step)
        radii.append(taylor_models(expression, center, half, degree).radius)
    for cell in range(2):
        above_rounding = [radius[cell] for radius in radii if radius[cell] > 3e-13]
        orders = -np.diff(np.log2(above_rounding))
        assert orders[-1] > degree + 0.9 - 0.3 * (degree == 6)
    assert np.all(radii[-1] < 3e-4 if degree == 0 else radii[-1] < 1e-7)


@pytest.mark.parametrize("degree", range(3, 9))
def test_polynomials_are_kept_as_they_are(degree):
    center, half = np.array([[0.5], [-2.0]]), np.array([[0.25], [1.0]])
    model = taylor_models(parse("3 + x*y - (x - y)^3/4"), center, half, degree)
    assert 0 < model.radius[0] < 1e-13
    x, y = (Fraction(1, 2), Fraction(1, 4)), (Fraction(-2), Fraction(1))
    for s, t in product((-1, 0, 1), repeat=2):
        a, b = x[0] + x[1] * s, y[0] + y[1] * t
        exact = 3 + a * b - (a - b) ** 3 / 4
        assert abs(exact_polynomial(model, 0, (s, t)) - exact) <= Fraction(float(model.radius[0]))


def test_a_square_that_is_cut_moves_into_the_remainder():
    model = taylor_models(parse("x^2"), np.array([[1.0], [0.0]]), np.array([[0.5], [1.0]]), 1)
    assert model.coefficients[0].tolist() == [1.0, 1.0, 0.0]
    assert model.radius[0] == pytest.approx(0.25)
    assert (model.exponents == [[0, 0], [1, 0], [0, 1]]).all()


@pytest.mark.parametrize("text", ["abs(x)", "abs(x - 0.3)", "max(x, y)", "min(x^2, y, 0.2)", "max(0, x)^2"])
def test_kinks_are_exact_where_they_are_decided_and_bounded_elsewhere(text):
    expression = parse(text)
    ticks = np.linspace(-1, 1, 21)
    center = np.array(np.meshgrid(ticks + 0.03, ticks)).reshape(2, -1)
    half = np.full_like(center, 0.05)
    model = taylor_models(expression, center, half, 2)
    width = enclosures(expression, center - half, center + half)
    decided = model.radius < 1e-12
    assert 0.3 < np.mean(decided) < 1
    assert np.all(model.radius <= (width.upper - width.lower) / 2 + 1e-12)
    local = np.random.default_rng(1).uniform(-1, 1, (2, len(center[0]), 30))
    points = center[:, :, None] + half[:, :, None] * local
    errors = np.abs(evaluate(model, local) - values(expression, points))
    assert np.all(errors <= model.radius[:, None] + 1e-14)


def test_a_line_replaces_an_undecided_kink():
    """On [-1, 3] the line through the ends of |x| leaves 3/4 on each side, the middle of the range 3/2."""
    model = taylor_models(parse("abs(x)"), np.array([[1.0], [0.0]]), np.array([[2.0], [1.0]]), 2)
    assert model.coefficients[0, :3] == pytest.approx([1.25, 1.0, 0.0])
    assert model.radius[0] == pytest.approx(0.75)
    mirrored = taylor_models(parse("abs(x)"), np.array([[-1.0], [0.0]]), np.array([[2.0], [1.0]]), 2)
    assert mirrored.coefficients[0, :3] == pytest.approx([1.25, -1.0, 0.0])
    assert mirrored.radius[0] == pytest.approx(0.75)
    assert taylor_models(parse("abs(x)"), np.zeros((2, 1)), np.ones((2, 1)), 2).radius[0] == pytest.approx(0.5)


def test_derivatives_of_kinks_are_models_too():
    slope = parse("max(2*x, x^2)").derivative("x")
    center, half = np.array([[-1.0, 0.05, 1.0, 3.0], [0, 0, 0, 0]]), np.full((2, 4), 0.1)
    model = taylor_models(slope, center, half, 3)
    assert model.coefficients[[0, 2, 3], 0] == pytest.approx([-2, 2, 6])
    assert np.all(model.radius[[0, 2, 3]] < 1e-12)
    bounds = range_bounds(model)
    assert bounds.lower[1] <= -0.1
    assert 2 <= bounds.upper[1] < 2.5
    sign = taylor_models(parse("abs(x)").derivative("x"), center, half, 3)
    assert sign.coefficients[:, 0].tolist() == [-1, 0, 1, 1]
    assert sign.radius.tolist() == [0, 1, 0, 0]


def test_coarse_cells_fall_back_to_the_enclosure():
    center, half = np.zeros((2, 1)), np.full((2, 1), 40.0)
    model = taylor_models(parse("sin(x*y) + 1/(1 + x^2)"), center, half, 6)
    assert model.radius[0] <= 1.51
    assert range_bounds(model).upper[0] <= 2.01


@pytest.mark.parametrize(
    ("text", "defined", "undefined"),
    [
        ("log(x)", [False, False, True], [True, False, False]),
        ("sqrt(x)", [False, False, True], [True, False, False]),
        ("1/x", [True, False, True], [False, False, False]),
        ("x^0.3", [False, False, True], [True, False, False]),
        ("tan(x + pi/2)", [True, False, True], [False, False, False]),
        ("max(1/x, 7)", [True, False, True], [False, False, False]),
        ("sin(1/x)", [True, False, True], [False, False, False]),
        ("0*log(x)", [False, False, True], [True, False, False]),
    ],
)
def test_cells_without_values_are_marked_and_unbounded(text, defined, undefined):
    center, half = np.array([[-1.0, 0.0, 1.0], [0.0, 0.0, 0.0]]), np.full((2, 3), 0.25)
    model = taylor_models(parse(text), center, half, 4)
    assert model.bounds.defined.tolist() == defined
    assert model.bounds.undefined.tolist() == undefined
    assert np.isfinite(model.radius).tolist() == defined
    assert np.all(model.coefficients[~np.array(defined)] == 0)


def test_overflow_gives_an_infinite_radius_and_no_nan():
    center, half = np.array([[600.0, 1.0], [2.0, 2.0]]), np.ones((2, 2))
    for text in ["exp(x*y)", "exp(x)*exp(x*y)", "exp(x*y) - exp(x*y)", "x^1000", "1e307*x*x", "1/exp(x*y)"]:
        model = taylor_models(parse(text), center, half, 5)
        assert not np.any(np.isnan(model.radius))
        assert np.all(np.isfinite(model.coefficients))
        assert np.isfinite(model.radius[1])


def test_parallelograms():
    """Local variables that run along the sides of skew cells."""
    expression = parse("exp(x)*y + x*y^2")
    random = np.random.default_rng(2)
    center, slopes = random.uniform(-1, 1, (2, 50)), random.uniform(-0.1, 0.1, (2, 2, 50))
    model = taylor_models(expression, center, slopes, 6)
    local = random.uniform(-1, 1, (2, 50, 7))
    points = center[:, :, None] + np.einsum("ijk,jkl->ikl", slopes, local)
    assert np.max(np.abs(evaluate(model, local) - values(expression, points))) < 1e-8
    assert np.all(np.abs(evaluate(model, local) - values(expression, points)) <= model.radius[:, None] + 1e-14)
    same = random.uniform(-1, 1, (2, 4))
    assert evaluate(model, same) == pytest.approx(evaluate(model, np.repeat(same[:, None], 50, axis=1)))


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_dimensions(dimension):
    text = " + ".join("xyz"[:dimension]) + " + exp(" + "*".join("xyz"[:dimension]) + ")"
    center, half = np.full((dimension, 20), 0.5), np.full((dimension, 20), 0.01)
    model = taylor_models(parse(text, variables=("x", "y", "z")), center, half, 5)
    assert model.coefficients.shape == (20, [6, 21, 56][dimension - 1])
    assert np.all(model.radius < 1e-11)
    local = np.random.default_rng(0).uniform(-1, 1, (dimension, 20, 5))
    true = values(parse(text, variables=("x", "y", "z")), center[:, :, None] + half[:, :, None] * local)
    assert evaluate(model, local) == pytest.approx(true, rel=1e-11)


def test_constants_and_all_degrees_fill_every_cell():
    for degree in range(9):
        model = taylor_models(parse("2/3"), np.zeros((2, 5)), np.ones((2, 5)), degree)
        assert model.coefficients.shape == (5, (degree + 1) * (degree + 2) // 2)
        error = abs(Fraction(float(model.coefficients[2, 0])) - Fraction(2, 3))
        assert error <= Fraction(float(model.radius[2])) < Fraction(2e-16)
        assert model.bounds.lower.shape == model.radius.shape == (5,)


def test_bounds_of_even_monomials_are_one_sided():
    model = taylor_models(parse("x^2 + y^2"), np.zeros((2, 1)), np.ones((2, 1)), 2)
    bounds = range_bounds(model)
    assert bounds.lower[0] == pytest.approx(0, abs=1e-9)
    assert bounds.upper[0] == pytest.approx(2, abs=1e-9)


def test_degrees_beyond_the_range_are_refused():
    for degree, dimension in [(-1, 2), (9, 2), (3, 0)]:
        with pytest.raises(ValueError, match="degree 0 to 8"):
            TaylorAlgebra(degree, dimension)


def test_models_narrow_what_plain_intervals_lose():
    """1/(x - x^2 - 1) cancels: the polynomial sees it, interval arithmetic does not."""
    center, half = np.array([[0.5], [0.0]]), np.array([[0.5], [1.0]])
    expression = parse("x - x^2")
    model = range_bounds(taylor_models(expression, center, half, 2))
    plain = enclosures(expression, center - half, center + half)
    assert model.upper[0] - model.lower[0] < 0.26
    assert plain.upper[0] - plain.lower[0] > 1.9


def test_ten_thousand_cells_take_well_under_a_tenth_of_a_second():
    expression = parse("1 + x^2 + 0.5*sin(3*y)")
    center = np.random.default_rng(0).uniform(-1, 1, (2, 10_000))
    half = np.full_like(center, 0.01)
    times = []
    for _ in range(5):
        start = time.process_time()
        taylor_models(expression, center, half, 5)
        times.append(time.process_time() - start)
    assert min(times) < 0.1
