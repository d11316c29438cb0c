"""What a text means: precedence, tree, canonical text, exact numbers."""

import math
import pickle
from fractions import Fraction

import numpy as np
import pytest
from expression_oracles import COORDINATES, examples, python_value, texts
from hypothesis import given

from service.problem.expressions.errors import ExpressionError
from service.problem.expressions.expression import Expression
from service.problem.expressions.nodes import (
    Call,
    Negation,
    Number,
    Pi,
    Power,
    Product,
    Reciprocal,
    Sum,
    Variable,
)
from service.problem.expressions.parser import Limits, parse
from service.problem.expressions.readings import enclosures, values

X, Y = Variable("x"), Variable("y")
TWO, THREE = Number(Fraction(2)), Number(Fraction(3))


@pytest.mark.parametrize(
    ("text", "tree"),
    [
        ("x", X),
        (" ( x ) ", X),
        ("0.1", Number(Fraction(1, 10))),
        ("1e-3", Number(Fraction(1, 1000))),
        ("2.50E+1", Number(Fraction(25))),
        (".5", Number(Fraction(1, 2))),
        ("3.", THREE),
        ("pi", Pi()),
        ("-x^2", Negation(Power(X, TWO))),
        ("(-x)^2", Power(Negation(X), TWO)),
        ("x^-2", Power(X, Negation(TWO))),
        ("x^y^2", Power(X, Power(Y, TWO))),
        ("(x^y)^2", Power(Power(X, Y), TWO)),
        ("2^-x^2", Power(TWO, Negation(Power(X, TWO)))),
        ("--x", Negation(Negation(X))),
        ("x-y-2", Sum((X, Negation(Y), Negation(TWO)))),
        ("x-(y-2)", Sum((X, Negation(Sum((Y, Negation(TWO))))))),
        ("x/y/2", Product((X, Reciprocal(Y), Reciprocal(TWO)))),
        ("x/(y/2)", Product((X, Reciprocal(Product((Y, Reciprocal(TWO))))))),
        ("x/y*2", Product((X, Reciprocal(Y), TWO))),
        ("x+y*2", Sum((X, Product((Y, TWO))))),
        ("(x+y)*2", Product((Sum((X, Y)), TWO))),
        ("-x*y", Product((Negation(X), Y))),
        ("x*-y", Product((X, Negation(Y)))),
        ("x - -y", Sum((X, Negation(Negation(Y))))),
        ("2*x^2", Product((TWO, Power(X, TWO)))),
        ("sin(x)^2", Power(Call("sin", (X,)), TWO)),
        ("max(x, y, 2)", Call("max", (X, Y, TWO))),
        ("\tx\n+\ry ", Sum((X, Y))),
    ],
)
def test_tree_of_a_text(text, tree):
    assert parse(text).root == tree


@pytest.mark.parametrize(
    ("text", "canonical"),
    [
        ("1.50 *x", "1.5*x"),
        ("((x))+((y*2))", "x + y*2"),
        ("x+(-y)", "x - y"),
        ("x-(y+2)", "x - (y + 2)"),
        ("-(x*y)", "-(x*y)"),
        ("(x*y)/(2*y)", "(x*y)/(2*y)"),
        ("(x^2)^3", "(x^2)^3"),
        ("x^(2^3)", "x^2^3"),
        ("x^(-2)", "x^-2"),
        ("x^(1/2)", "x^(1/2)"),
        ("(-x)^2", "(-x)^2"),
        ("min( x,y )", "min(x, y)"),
        ("1000000", "1000000"),
        ("1e-7", "0.0000001"),
        ("1e300", "1e300"),
        ("12.5e-30", "1.25e-29"),
        ("0e5", "0"),
    ],
)
def test_canonical_text(text, canonical):
    assert parse(text).text() == canonical


@given(texts())
@examples(250)
def test_text_reads_back_as_the_same_expression(text):
    expression = parse(text)
    assert parse(expression.text()) == expression
    assert pickle.loads(pickle.dumps(expression)) == expression


@given(texts(), COORDINATES, COORDINATES)
@examples(250)
def test_value_is_what_python_makes_of_the_same_text(text, x, y):
    point = np.array([x, y])
    ours = float(values(parse(text), point))
    box = enclosures(parse(text), point, point)
    try:
        theirs = python_value(text, x=x, y=y)
    except OverflowError:
        return
    except (ZeroDivisionError, ValueError, TypeError):
        # Division by zero, a logarithm of a negative number, a function of a complex one.
        assert not math.isfinite(ours) or not box.defined
        return
    if isinstance(theirs, complex) or math.isnan(ours):
        # A negative number to a power that is not a constant: complex there, without a value here.
        assert not box.defined
    elif abs(theirs) < 1e12:
        assert abs(ours - theirs) <= 1e-9 * (1 + abs(theirs)) + (box.upper - box.lower)


@given(texts())
@examples(200)
def test_equal_parts_are_one_object(text):
    root = parse(f"({text})*sin({text})").root
    assert isinstance(root, Product)
    seen = {}
    stack = [root]
    while stack:
        node = stack.pop()
        assert seen.setdefault(node, node) is node
        stack.extend(getattr(node, "factors", ()) or getattr(node, "terms", ()))


def test_a_product_may_hold_one_part_several_times():
    expression = parse("x*x*x/y/y")
    assert values(expression, np.array([3.0, 2.0])) == 27 / 4


def test_decimals_are_exact():
    assert parse("0.1").exact == Fraction(1, 10)
    assert parse("0.1 + 0.2").exact == Fraction(3, 10)
    assert parse("2^10/3").exact == Fraction(1024, 3)
    assert parse("1e300*1e-300").exact == 1
    assert parse("x - x").exact is None
    assert parse("pi").exact is None
    assert parse("1/0").exact is None
    assert parse("0^-1").exact is None
    assert parse("2^(1/2)").exact is None


def test_exact_values_do_not_grow_without_end():
    assert parse("*".join(["1e300"] * 4)).exact is None
    assert parse("(1e200)^1000").exact is None
    assert (parse("1e300") + parse("1e-300")).text() == "1e-300 + 1e300"
    assert enclosures(parse("1e300*1e300*x"), np.ones(1), np.ones(1)).upper == np.inf


def test_constants_and_variables():
    assert parse("x + sin(pi)").variables() == {"x"}
    assert parse("min(x, y)*x").variables() == {"x", "y"}
    assert parse("2^(1/2) + sin(pi)").is_constant
    assert not parse("0*x").is_constant


def test_other_variables_can_be_named():
    assert parse("z*mu", variables=("z", "mu")).variables() == {"z", "mu"}
    with pytest.raises(ExpressionError, match=r"character 3.*Known here: z, mu, pi, sin"):
        parse("z*x", variables=("z", "mu"))


def test_constants_from_numbers_are_exact():
    assert Expression.constant(0.1).exact == Fraction(0.1)
    assert Expression.constant(-2).text() == "-2"
    assert Expression.constant(Fraction(-1, 3)).text() == "-(1/3)"
    assert parse(Expression.constant(5e-324).text()).exact == Fraction(5e-324)
    assert parse(Expression.constant(1.7976931348623157e308).text()).exact == Fraction(1.7976931348623157e308)
    with pytest.raises(ValueError, match="NaN"):
        Expression.constant(math.nan)


def test_expressions_combine():
    x, half = parse("x"), Expression.constant(0.5)
    assert (-x).text() == "-x"
    assert (-parse("-x")).text() == "x"
    assert (x + half - parse("y")).text() == "x - y + 0.5"
    assert (x * half).text() == "0.5*x"
    assert (x / half).text() == "2*x"
    assert (x / parse("y")).text() == "x/y"
    assert (x - half + half).text() == "x"
    assert (x * Expression.constant(0)).text() == "0"


def test_long_flat_expressions_are_accepted():
    text = "+".join(["x", *(f"{n}*y" for n in range(100))])
    assert values(parse(text), np.array([1.0, 1.0])) == 1 + 99 * 50
    assert parse("-".join(["x"] * 1000)).root == Sum((X, *[Negation(X)] * 999))


def test_limits_can_be_set():
    assert parse("x" + "+x" * 2000, limits=Limits(length=5000)).variables() == {"x"}
    with pytest.raises(ExpressionError, match="more than 3 different parts"):
        parse("x+y+x*y", limits=Limits(nodes=3))
    with pytest.raises(ExpressionError, match="nested more than 3 deep"):
        parse("(((x)))", limits=Limits(depth=3))
