"""The tree of an expression: plain frozen data, shaped exactly as the grammar reads it.

Two marks keep chains flat: a term that is subtracted is a ``Negation`` in a ``Sum``, a factor that is divided
by is a ``Reciprocal`` in a ``Product``. So a - b + c stays flat, however long it gets.
"""

from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction
from typing import TypeAlias

UNARY = ("sin", "cos", "tan", "exp", "log", "sqrt", "abs", "tanh")
"""The functions of one argument."""

VARIADIC = ("min", "max")
"""The functions of two or more arguments."""


@dataclass(frozen=True)
class Number:
    """A decimal number without sign, exactly as written (0.1 is one tenth)."""

    value: Fraction


@dataclass(frozen=True)
class Pi:
    """The number pi."""


@dataclass(frozen=True)
class Variable:
    """A coordinate."""

    name: str


@dataclass(frozen=True)
class Negation:
    """Minus the operand."""

    operand: "Node"


@dataclass(frozen=True)
class Sum:
    """Two or more terms, added from left to right."""

    terms: tuple["Node", ...]


@dataclass(frozen=True)
class Reciprocal:
    """One over the operand; only as a factor of a product, and never as its first."""

    operand: "Node"


@dataclass(frozen=True)
class Product:
    """Two or more factors, multiplied from left to right."""

    factors: tuple["Node", ...]


@dataclass(frozen=True)
class Power:
    """A base raised to an exponent."""

    base: "Node"
    exponent: "Node"


@dataclass(frozen=True)
class Call:
    """A function of the language, applied to one argument or (min, max) to several."""

    function: str
    arguments: tuple["Node", ...]


@dataclass(frozen=True)
class Sign:
    """-1, 0 or 1 as the operand is negative, zero or positive: the derivative of abs. Not in the language."""

    operand: "Node"


@dataclass(frozen=True)
class Choose:
    """``positive`` where ``condition`` > 0, ``negative`` where it is < 0, their mean where it is 0.

    The derivative of min and max. Not in the language.
    """

    condition: "Node"
    positive: "Node"
    negative: "Node"


Node: TypeAlias = (
    Number | Pi | Variable | Negation | Sum | Reciprocal | Product | Power | Call | Sign | Choose
)


def operands(node: Node) -> tuple[Node, ...]:
    """The nodes directly under a node, from left to right."""
    match node:
        case Negation(operand) | Reciprocal(operand) | Sign(operand):
            return (operand,)
        case Sum(several) | Product(several) | Call(_, several):
            return several
        case Power(base, exponent):
            return (base, exponent)
        case Choose(condition, positive, negative):
            return (condition, positive, negative)
        case Number() | Pi() | Variable():
            return ()


def ordered(root: Node, below: Callable[[Node], tuple[Node, ...]] = operands) -> list[Node]:
    """Every node under ``root`` once, operands before what is made of them, the root last.

    A node that is used in several places (the same object) appears once. Nothing here recurses, so that depth
    costs no stack.
    """
    found: list[Node] = []
    seen: set[int] = set()
    waiting = [(root, False)]
    while waiting:
        node, complete = waiting.pop()
        if complete:
            found.append(node)
        elif id(node) not in seen:
            seen.add(id(node))
            waiting.append((node, True))
            waiting.extend((operand, False) for operand in reversed(below(node)))
    return found
