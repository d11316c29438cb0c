"""Makes nodes with the obvious simplifications, in the shapes that the grammar reads.

0 + a, 1 * a, 0 * a, --a, a / 1, a^1, a^0 and arithmetic of rational constants disappear; sums in sums and
products in products become one. Zero times a is zero even where a is undefined.
"""

from collections.abc import Iterable
from fractions import Fraction

from service.problem.expressions.exact import is_short
from service.problem.expressions.nodes import (
    Negation,
    Node,
    Number,
    Power,
    Product,
    Reciprocal,
    Sum,
)
from service.problem.expressions.text import decimal_digits
from service.problem.expressions.tokens import MOST_DIGITS


def known_value(node: Node) -> Fraction | None:
    """The value of a constant in one of the shapes that ``number`` makes."""
    match node:
        case Number(value):
            return value
        case Negation(operand):
            value_below = known_value(operand)
            return None if value_below is None else -value_below
        case Product((Number(over), Reciprocal(Number(under)))) if under:
            return over / under
        case _:
            return None


def number(value: Fraction | int) -> Node:
    """A rational constant: a decimal where there is one, a quotient of integers elsewhere."""
    value = Fraction(value)
    if value < 0:
        return Negation(number(-value))
    if _is_decimal(value):
        return Number(value)
    over, under = Fraction(value.numerator), Fraction(value.denominator)
    return Product((Number(over), Reciprocal(Number(under))))


def _is_decimal(value: Fraction) -> bool:
    try:
        return len(decimal_digits(value)[0]) <= MOST_DIGITS
    except ValueError:
        return False


def negated(node: Node) -> Node:
    """Minus a node."""
    if isinstance(node, Negation):
        return node.operand
    return node if known_value(node) == 0 else Negation(node)


def added(*nodes: Node) -> Node:
    """The sum of nodes; the constants among the terms are added up and stand last."""
    terms: list[Node] = []
    total = Fraction(0)
    for term in _spliced(nodes):
        value = known_value(term)
        if value is None or not is_short(total + value):
            terms.append(term)
        else:
            total += value
    if total or not terms:
        terms.append(number(total))
    return terms[0] if len(terms) == 1 else Sum(tuple(terms))


def _spliced(nodes: Iterable[Node]) -> Iterable[Node]:
    for node in nodes:
        if isinstance(node, Sum):
            yield from node.terms
        else:
            yield node


def multiplied(*nodes: Node) -> Node:
    """The product of nodes; signs and constants among the factors are gathered in front."""
    scale = Fraction(1)
    over: list[Node] = []
    under: list[Reciprocal] = []
    waiting = list(reversed(nodes))
    while waiting:
        node = waiting.pop()
        value = known_value(node)
        divisor = known_value(node.operand) if isinstance(node, Reciprocal) else None
        if value is not None and is_short(scale * value):
            scale *= value
        elif divisor and is_short(scale / divisor):
            scale /= divisor
        elif isinstance(node, Negation):
            scale = -scale
            waiting.append(node.operand)
        elif isinstance(node, Product):
            waiting.extend(reversed(node.factors))
        elif isinstance(node, Reciprocal):
            under.append(node)
        else:
            over.append(node)
    if scale == 0:
        return number(0)
    if not over and not under:
        return number(scale)
    if abs(scale) != 1 or not over:
        size = number(abs(scale))
        over[:0] = size.factors if isinstance(size, Product) else [size]
    factors = (*over, *under)
    product = factors[0] if len(factors) == 1 else Product(factors)
    return product if scale > 0 else Negation(product)


def divided(over: Node, under: Node) -> Node:
    """A quotient."""
    return multiplied(over, under if known_value(under) == 1 else Reciprocal(under))


def raised(base: Node, exponent: Node) -> Node:
    """A power."""
    known = known_value(exponent)
    if known == 0:
        return number(1)
    return base if known == 1 else Power(base, exponent)
