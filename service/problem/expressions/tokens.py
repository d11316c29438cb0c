"""Cuts the text of an expression into numbers, names and marks, each with its place."""

import re
from dataclasses import dataclass
from fractions import Fraction

from service.problem.expressions.errors import ExpressionError

MOST_DIGITS = 800
"""Significant digits of one number; the exact decimal of every double fits."""

LARGEST_EXPONENT = 400
"""Size of a number's leading power of ten: beyond the doubles on both sides, and still cheap to write out."""

LARGEST_NUMBER = Fraction(2**1024 - 2**970)
"""The largest finite double."""

FOREIGN = "This character has no meaning in an expression."
TOO_LARGE = "The number is too large for a computation."
TOO_SMALL = "The number is too small for a computation."

SHAPES = re.compile(
    r"(?P<space>[ \t\r\n]+)"
    r"|(?P<number>(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?)"
    r"|(?P<name>[A-Za-z_][A-Za-z_0-9]*)"
    r"|(?P<mark>\*\*|[-+*/^(),])"
    r"|(?P<foreign>.)",
    re.DOTALL,
)


@dataclass(frozen=True)
class Token:
    """A piece of the text.

    kind : ``"number"``, ``"name"``, ``"mark"``, ``"foreign"`` or, behind the last piece, ``"end"``.
    text : the piece as written; empty at the end.
    position : offset of its first character.
    """

    kind: str
    text: str
    position: int


def tokens(text: str) -> list[Token]:
    """The pieces of ``text`` without its spaces, closed by an end."""
    found = [
        Token(shape.lastgroup, shape.group(), shape.start())
        for shape in SHAPES.finditer(text)
        if shape.lastgroup and shape.lastgroup != "space"
    ]
    return [*found, Token("end", "", len(text))]


def number(token: Token) -> Fraction:
    """The exact value of a number; ExpressionError if it has too many digits or is beyond the doubles."""
    mantissa, _, exponent = token.text.lower().partition("e")
    whole, _, decimals = mantissa.partition(".")
    digits = (whole + decimals).lstrip("0").rstrip("0")
    if not digits:
        return Fraction(0)
    if len(digits) > MOST_DIGITS:
        raise ExpressionError(token.position, f"A number has at most {MOST_DIGITS} significant digits.")
    if len(exponent.lstrip("+-0")) > len(str(LARGEST_EXPONENT)):
        raise ExpressionError(token.position, TOO_SMALL if exponent.startswith("-") else TOO_LARGE)
    trailing = len(whole + decimals) - len((whole + decimals).rstrip("0"))
    power = int(exponent or "0") - len(decimals) + trailing
    leading = power + len(digits) - 1
    if leading < -LARGEST_EXPONENT:
        raise ExpressionError(token.position, TOO_SMALL)
    value = int(digits) * Fraction(10) ** power if leading <= LARGEST_EXPONENT else None
    if value is None or value > LARGEST_NUMBER:
        raise ExpressionError(token.position, TOO_LARGE)
    return value
