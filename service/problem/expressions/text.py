"""Writes a tree as text that reads back as the same tree."""

from fractions import Fraction

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

SUM, PRODUCT, FACTOR, ATOM = range(4)
"""The levels of the grammar, loosest first."""

PLAIN_DIGITS = 15
"""Numbers with at most this many digits before and behind the point are written without exponent."""


def rendered(root: Node) -> str:
    """The canonical text of a tree: single spaces around + and -, none elsewhere, no needless parentheses.

    ``Sign`` and ``Choose``, which only derivatives contain, appear as ``sign(...)`` and ``choose(...)``.
    """
    texts: dict[int, tuple[str, int]] = {}

    def at(node: Node, level: int) -> str:
        text, own = texts[id(node)]
        return text if own >= level else f"({text})"

    def later(node: Node, mark: type[Negation] | type[Reciprocal], marks: tuple[str, str], level: int) -> str:
        return marks[0] + at(node.operand, level) if isinstance(node, mark) else marks[1] + at(node, level)

    for node in ordered(root):
        match node:
            case Number(value):
                made = decimal(value), ATOM
            case Pi():
                made = "pi", ATOM
            case Variable(name):
                made = name, ATOM
            case Negation(operand):
                made = f"-{at(operand, FACTOR)}", FACTOR
            case Reciprocal(operand):
                made = f"1/{at(operand, FACTOR)}", PRODUCT
            case Sum(terms):
                rest = "".join(later(term, Negation, (" - ", " + "), PRODUCT) for term in terms[1:])
                made = at(terms[0], PRODUCT) + rest, SUM
            case Product(factors):
                rest = "".join(later(factor, Reciprocal, ("/", "*"), FACTOR) for factor in factors[1:])
                made = at(factors[0], FACTOR) + rest, PRODUCT
            case Power(base, exponent):
                made = f"{at(base, ATOM)}^{at(exponent, FACTOR)}", FACTOR
            case Call(function, arguments):
                made = f"{function}({', '.join(at(argument, SUM) for argument in arguments)})", ATOM
            case Sign(operand):
                made = f"sign({at(operand, SUM)})", ATOM
            case Choose(condition, positive, negative):
                parts = (condition, positive, negative)
                made = f"choose({', '.join(at(part, SUM) for part in parts)})", ATOM
        texts[id(node)] = made
    return texts[id(root)][0]


def decimal(value: Fraction) -> str:
    """The shortest exact decimal of a number >= 0 whose denominator has no factors but 2 and 5."""
    digits, power = decimal_digits(value)
    before, behind = len(digits) + power, max(-power, 0)
    if before > PLAIN_DIGITS or behind > PLAIN_DIGITS:
        point = f".{digits[1:]}" if len(digits) > 1 else ""
        return f"{digits[0]}{point}e{before - 1}"
    if power >= 0:
        return digits + "0" * power
    padded = digits.rjust(behind + 1, "0")
    return f"{padded[:-behind]}.{padded[-behind:]}"


def decimal_digits(value: Fraction) -> tuple[str, int]:
    """``(digits, power)`` with value = digits * 10^power, no needless zeros; ValueError if there are none."""
    rest, twos = value.denominator, 0
    while rest % 2 == 0:
        rest, twos = rest // 2, twos + 1
    fives = 0
    while rest % 5 == 0:
        rest, fives = rest // 5, fives + 1
    if value < 0 or rest != 1:
        raise ValueError("not a finite decimal without sign")
    behind = max(twos, fives)
    written = str(int(value * 10**behind))
    digits = written.rstrip("0") or "0"
    return digits, len(written) - len(digits) - behind if value else 0
