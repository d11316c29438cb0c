"""Derivatives against multiple-precision difference quotients, and what happens at kinks."""

import time

import mpmath
import numpy as np
import pytest
from expression_oracles import COORDINATES, Multiprecision, UndefinedError, examples, texts, true_value
from hypothesis import assume, given
from hypothesis import strategies as st

from service.problem.expressions.errors import DerivativeError
from service.problem.expressions.parser import parse
from service.problem.expressions.readings import enclosures, values


@pytest.mark.parametrize(
    ("text", "derivative"),
    [
        ("7", "0"),
        ("pi*y", "0"),
        ("x", "1"),
        ("-x", "-1"),
        ("3*x + 2", "3"),
        ("x^2", "2*x"),
        ("x^3/3", "x^2"),
        ("1 + x^2 + 0.5*sin(3*y)", "2*x"),
        ("x*y", "y"),
        ("x*x", "x + x"),
        ("1/x", "-(1/x^2)"),
        ("y/x", "-(y/x^2)"),
        ("x^-1", "-x^-2"),
        ("x^0.5", "0.5*x^-0.5"),
        ("x^(1/3)", "1/3*x^-(2/3)"),
        ("x^pi", "pi*x^(pi - 1)"),
        ("2^x", "2^x*log(2)"),
        ("x^y", "y*x^(y - 1)"),
        ("sin(2*x)", "2*cos(2*x)"),
        ("cos(x)", "-sin(x)"),
        ("tan(x)", "tan(x)^2 + 1"),
        ("tanh(x)", "-tanh(x)^2 + 1"),
        ("exp(-x)", "-exp(-x)"),
        ("log(x)", "1/x"),
        ("sqrt(x)", "0.5/sqrt(x)"),
        ("abs(x)", "sign(x)"),
        ("abs(y)", "0"),
        ("max(x, 1)", "choose(x - 1, 1, 0)"),
        ("min(x, y)", "choose(y - x, 1, 0)"),
        ("max(x, x)", "1"),
        ("(x - 1)*(x - 1)", "x + x - 2"),
    ],
)
def test_derivative_is_simplified(text, derivative):
    assert parse(text).derivative("x").text() == derivative


@given(texts(kinks=False), COORDINATES, COORDINATES, st.sampled_from("xy"))
@examples(250)
def test_derivative_is_the_limit_of_difference_quotients(text, x, y, variable):
    expression = parse(text)
    try:
        slope = true_value(expression.derivative(variable), x=x, y=y)
        value = true_value(expression, x=x, y=y)
    except (UndefinedError, OverflowError):
        assume(False)
    assume(slope is not None and value is not None and abs(slope) < 1e60 and abs(value) < 1e60)
    with mpmath.workprec(900):
        point = {"x": mpmath.mpf(x), "y": mpmath.mpf(y)}

        def shifted(offset):
            moved = {**point, variable: point[variable] + offset}
            return expression.read(Multiprecision(), moved)

        try:
            quotients = [
                (shifted(step) - shifted(-step)) / (2 * step)
                for step in (mpmath.mpf(2) ** -150, mpmath.mpf(2) ** -200)
            ]
        except UndefinedError:
            assume(False)
        coarse, fine = (abs(quotient - slope) for quotient in quotients)
        assert fine <= mpmath.mpf(10) ** -25 * (1 + abs(slope) + abs(value)) or fine < coarse / 1e20


@given(texts(), COORDINATES, COORDINATES, st.sampled_from("xy"), st.sampled_from([1e-3, 0.5, 3.0]))
@examples(250)
def test_mean_slope_lies_in_the_enclosure_of_the_weak_derivative(text, x, y, variable, width):
    """Also across kinks: a Lipschitz function is the integral of its weak derivative."""
    expression = parse(text)
    start = np.array([x, y])
    end = start + width * np.array([variable == "x", variable == "y"])
    box = enclosures(expression.derivative(variable), start, end)
    assume(box.defined and enclosures(expression, start, end).defined)
    try:
        first = true_value(expression, x=start[0], y=start[1])
        last = true_value(expression, x=end[0], y=end[1])
    except OverflowError:
        assume(False)
    assume(first is not None and last is not None)
    with mpmath.workprec(300):
        length = sum(mpmath.mpf(b) - mpmath.mpf(a) for a, b in zip(start, end, strict=True))
        assume(length > 0)
        mean = (last - first) / length
        slack = (abs(first) + abs(last)) / length * mpmath.mpf(10) ** -35
        assert float(box.lower) - slack <= mean <= float(box.upper) + slack


def test_kinks_take_every_slope_between_the_one_sided_ones():
    at = np.array([[-1.0, 0.0, 1.0]]), np.array([[-0.5, 0.0, 2.0]])
    box = enclosures(parse("abs(x)").derivative("x"), *at)
    assert (box.lower.tolist(), box.upper.tolist()) == ([-1, 0, 1], [-1, 0, 1])
    across = enclosures(parse("max(3*x, -x)").derivative("x"), np.array([-1.0]), np.array([1.0]))
    assert (across.lower, across.upper) == (-1, 3)
    slopes = values(parse("min(x, 2*x, 1)").derivative("x"), np.array([[-1.0, 0.0, 0.2, 0.7, 3.0]]))
    assert slopes.tolist() == [2, 1.5, 1, 1, 0]


def test_the_branch_not_taken_may_be_undefined():
    slope = parse("max(sqrt(x), 1)").derivative("x")
    inside = enclosures(slope, np.array([0.0]), np.array([0.5]))
    assert (inside.lower, inside.upper, bool(inside.defined)) == (0, 0, True)
    assert not enclosures(slope, np.array([0.0]), np.array([2.0])).defined


@pytest.mark.parametrize("text", ["abs(x)", "x*abs(x)", "max(x^2, 1)", "min(x, y)", "sin(abs(x - y))"])
def test_jumps_have_no_derivative(text):
    slope = parse(text).derivative("x")
    with pytest.raises(DerivativeError, match="jumps"):
        slope.derivative("x")


def test_a_jump_in_one_direction_does_not_hinder_the_other():
    assert parse("y*abs(x)").derivative("x").derivative("y").text() == "sign(x)"
    assert parse("y*max(x, 1)").derivative("x").derivative("y").text() == "choose(x - 1, 1, 0)"
    assert parse("max(x, 1)").derivative("y").text() == "0"


def test_derivatives_read_back():
    for text in ["x^(1/3)*sin(y)/x", "x^y^2", "tan(x*y)^3 - 1/3", "exp(-((x-20)^2+(y-50)^2)/50)*0.1/7"]:
        slope = parse(text).derivative("x").derivative("y")
        assert parse(slope.text()) == slope


def test_divergence_of_a_rotated_gradient_vanishes():
    stream = parse("0.05*y*(1 - y/140)*exp(-x^2/9) + sin(x*y)")
    divergence = stream.derivative("y").derivative("x") - stream.derivative("x").derivative("y")
    points = np.random.default_rng(3).uniform(-3, 3, (2, 200))
    assert np.max(np.abs(values(divergence, points))) < 1e-13


def test_long_products_and_deep_chains_have_short_derivatives():
    start = time.process_time()
    product = parse("*".join(f"(x-{n})" for n in range(150)))
    slope = product.derivative("x").derivative("x")
    deep = parse("sin(" * 45 + "x" + ")" * 45).derivative("x").derivative("x")
    assert len(slope.text()) > 1000
    assert np.isfinite(values(deep, np.array([0.3])))
    assert values(slope, np.array([0.5])) != 0
    assert time.process_time() - start < 3
