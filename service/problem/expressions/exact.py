"""The exact value of the parts of an expression that are rational constants."""

from collections.abc import Callable, Sequence
from fractions import Fraction
from operator import add, mul

from service.problem.expressions.nodes import (
    Call,
    Choose,
    Negation,
    Node,
    Number,
    Pi,
    Power,
    Product,
    Reciprocal,
    Sign,
    Sum,
    Variable,
    ordered,
)

MOST_BITS = 1000
"""Size up to which exact values are kept (300 digits); longer ones are left to the reader's arithmetic."""


def exact_values(root: Node) -> dict[int, Fraction]:
    """The values of all rational constants under ``root``, by the ``id`` of their nodes.

    A constant without an entry is irrational, undefined, or too long to be worth writing out.
    """
    values: dict[int, Fraction] = {}
    for node in ordered(root):
        value = exact_value(node, values)
        if value is not None:
            values[id(node)] = value
    return values


def exact_value(node: Node, known: dict[int, Fraction]) -> Fraction | None:
    """The value of one node from those of its operands, ``None`` if it is not a known rational."""
    match node:
        case Number(value):
            return value
        case Negation(operand):
            value_below = known.get(id(operand))
            return None if value_below is None else -value_below
        case Sum(terms):
            return _folded(terms, known, add)
        case Product(factors):
            return _folded(factors, known, mul)
        case Reciprocal(operand):
            divisor = known.get(id(operand))
            return 1 / divisor if divisor else None
        case Power(base, exponent):
            return _power(known.get(id(base)), known.get(id(exponent)))
        case Pi() | Variable() | Call() | Sign() | Choose():
            return None


def _folded(
    nodes: Sequence[Node], known: dict[int, Fraction], combine: Callable[[Fraction, Fraction], Fraction]
) -> Fraction | None:
    """Exact values combined from left to right, ``None`` as soon as one is missing or the result too long."""
    result: Fraction | None = None
    for node in nodes:
        value = known.get(id(node))
        if value is None:
            return None
        result = value if result is None else combine(result, value)
        if not is_short(result):
            return None
    return result


def _power(base: Fraction | None, exponent: Fraction | None) -> Fraction | None:
    if base is None or exponent is None or exponent.denominator != 1 or (base == 0 and exponent < 0):
        return None
    if _bits(base) * abs(exponent) > MOST_BITS:
        return None
    return base**exponent.numerator


def is_short(value: Fraction) -> bool:
    """Whether an exact value is worth writing out."""
    return _bits(value) <= MOST_BITS


def _bits(value: Fraction) -> int:
    return max(value.numerator.bit_length(), value.denominator.bit_length())
