"""What is refused, with the character and the sentence; nothing a stranger writes takes long or escapes."""

import time

import pytest
from expression_oracles import examples
from hypothesis import given
from hypothesis import strategies as st

from service.problem.expressions.errors import ExpressionError
from service.problem.expressions.expression import Expression
from service.problem.expressions.parser import parse
from service.problem.expressions.text import rendered

OPERAND = "A number, a name, a minus or an opening parenthesis is expected here."
OPERATOR = "An operator is missing before this; a product is written with *."
FOREIGN = "This character has no meaning in an expression."
LARGE = "The number is too large for a computation."
COMMA = "A comma stands only between arguments of a function; decimals are written with a point."
NAMES = (
    "This name is not known. Known here: x, y, pi, sin, cos, tan, exp, log, sqrt, abs, tanh, min, max."
)


@pytest.mark.parametrize(
    ("text", "position", "sentence"),
    [
        ("", 0, "The expression is empty."),
        ("   ", 0, "The expression is empty."),
        ("x +", 3, OPERAND),
        ("x + * y", 4, OPERAND),
        ("+x", 0, OPERAND),
        ("()", 1, OPERAND),
        ("x^", 2, OPERAND),
        ("min(x,)", 6, OPERAND),
        (",x", 0, OPERAND),
        ("2x", 1, OPERATOR),
        ("x y", 2, OPERATOR),
        ("(x)(y)", 3, OPERATOR),
        ("2(x)", 1, OPERATOR),
        ("x(1)", 1, OPERATOR),
        ("sin(x)y", 6, OPERATOR),
        ("1..2", 2, OPERATOR),
        ("(x y)", 3, OPERATOR),
        ("1e", 1, OPERATOR),
        ("x**2", 1, "A power is written with ^."),
        ("(x**2)", 2, "A power is written with ^."),
        ("(x+1", 4, "The parenthesis opened at character 1 is not closed."),
        ("2*(x+(y)", 8, "The parenthesis opened at character 3 is not closed."),
        ("sin(x", 5, "The parenthesis opened at character 4 is not closed."),
        ("x)", 1, "This parenthesis was never opened."),
        ("1,5", 1, COMMA),
        ("(x,y)", 2, COMMA),
        ("sin x", 4, "The argument of sin stands in parentheses."),
        ("max", 3, "The argument of max stands in parentheses."),
        ("1+sin()", 2, "sin takes one argument."),
        ("1+sin(x,y)", 2, "sin takes one argument."),
        ("min()", 0, "min takes two or more arguments."),
        ("2*max(x)", 2, "max takes two or more arguments."),
        ("x + z", 4, NAMES),
        ("X", 0, NAMES),
        ("e", 0, NAMES),
        ("__import__('os')", 0, NAMES),
        ("lambda x: x", 0, NAMES),
        ("x.real", 1, FOREIGN),
        ("x.__class__", 1, FOREIGN),
        ("x[0]", 1, FOREIGN),
        ("x = 2", 2, FOREIGN),
        ("x; y", 1, FOREIGN),
        ("'x'", 0, FOREIGN),
        ("x\x00", 1, FOREIGN),
        ("x+\u0663", 2, FOREIGN),
        ("x+\uff11", 2, FOREIGN),
        ("x\u00b2", 1, FOREIGN),
        ("x\u00d72", 1, FOREIGN),
        ("x\u2212y", 1, FOREIGN),
        ("\u03c0", 0, FOREIGN),
        ("x\u00a0+y", 1, FOREIGN),
        ("\ud800", 0, FOREIGN),
        ("x\u0443", 1, FOREIGN),
        ("1e999", 0, LARGE),
        ("x+1e309", 2, LARGE),
        ("1.8e308", 0, LARGE),
        ("9" * 320, 0, LARGE),
        ("1e" + "9" * 1900, 0, LARGE),
        ("1e-999", 0, "The number is too small for a computation."),
        ("1e-" + "9" * 1900, 0, "The number is too small for a computation."),
        ("0." + "0" * 1900 + "1", 0, "The number is too small for a computation."),
        ("1." + "7" * 1000, 0, "A number has at most 800 significant digits."),
        ("x^1001", 2, "A whole exponent lies between -1000 and 1000."),
        ("x^-1001", 2, "A whole exponent lies between -1000 and 1000."),
        ("2^2^2^2^2", 2, "A whole exponent lies between -1000 and 1000."),
        ("9^9^9^9^9^9", 8, "A whole exponent lies between -1000 and 1000."),
        ("x" + "+x" * 1000, 2000, "An expression has at most 2000 characters."),
        ("(" * 100_000, 2000, "An expression has at most 2000 characters."),
        ("(" * 2000, 50, "The expression is nested more than 50 deep."),
        ("-" * 2000, 50, "The expression is nested more than 50 deep."),
        ("x^" * 1000, 100, "The expression is nested more than 50 deep."),
        ("sin(" * 500, 200, "The expression is nested more than 50 deep."),
        ("2^-" * 600, 75, "The expression is nested more than 50 deep."),
        ("1+2*(" * 30 + "x" + ")" * 30, 176, "The expression is nested more than 50 deep."),
        ("+".join(f"{n}*x" for n in range(300)), 1389, "The expression has more than 500 different parts."),
    ],
)
def test_refused_with_the_character_and_the_reason(text, position, sentence):
    start = time.process_time()
    with pytest.raises(ExpressionError) as caught:
        parse(text)
    assert (caught.value.position, caught.value.sentence) == (position, sentence)
    assert str(caught.value) == f"At character {position + 1}: {sentence}"
    assert time.process_time() - start < 0.5


@pytest.mark.parametrize(
    "text", ["(" * 49 + "x" + ")" * 49, "-" * 49 + "x", "0" * 1000 + "1.5", "1e308*1e308"]
)
def test_just_within_the_limits(text):
    assert rendered(parse(text).root)


def outcome(text):
    """The expression, or why the text is none; anything else that is raised fails the test."""
    try:
        return parse(text)
    except ExpressionError as refused:
        return refused


@given(st.text(st.sampled_from("xy12.e+-*/^(), sinmaxlog_\t"), max_size=40))
@examples(250)
def test_any_text_is_read_or_refused_at_one_of_its_characters(text):
    found = outcome(text)
    if isinstance(found, ExpressionError):
        assert 0 <= found.position <= len(text)
    else:
        assert parse(found.text()) == found


@given(st.text(max_size=30))
@examples(250)
def test_any_unicode_text_is_read_or_refused(text):
    found = outcome(text)
    assert isinstance(found, Expression) or 0 <= found.position <= len(text)
