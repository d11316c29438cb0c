"""From text to a tree: one function per level of the grammar, each a line of it.

    sum     = product (("+" | "-") product)*
    product = factor (("*" | "/") factor)*
    factor  = "-" factor | atom ("^" factor)?
    atom    = number | "pi" | variable | function "(" sum ("," sum)* ")" | "(" sum ")"

So ``^`` binds tighter than the minus before it (-x^2 is -(x^2)), groups to the right (x^y^z is x^(y^z)), and
its exponent may have a sign (x^-2).
"""

from collections.abc import Collection
from dataclasses import dataclass

from service.problem.expressions.errors import ExpressionError
from service.problem.expressions.exact import exact_values
from service.problem.expressions.expression import Expression
from service.problem.expressions.nodes import (
    UNARY,
    VARIADIC,
    Call,
    Negation,
    Node,
    Number,
    Pi,
    Power,
    Product,
    Reciprocal,
    Sum,
    Variable,
    operands,
)
from service.problem.expressions.tokens import FOREIGN, Token, number, tokens

LARGEST_POWER = 1000
"""Largest size of a whole exponent."""

OPERAND = "A number, a name, a minus or an opening parenthesis is expected here."


@dataclass(frozen=True)
class Limits:
    """What an expression may cost.

    length : characters of the text.
    depth : how far parentheses, functions, signs and exponents are nested, and the tree they make.
    nodes : distinct pieces of the tree.
    """

    length: int = 2000
    depth: int = 50
    nodes: int = 500


DEFAULT_LIMITS = Limits()


def parse(text: str, variables: Collection[str] = ("x", "y"), limits: Limits = DEFAULT_LIMITS) -> Expression:
    """The expression that a text means.

    Parameters
    ----------
    text : the expression, for example ``"1 + x^2 + 0.5*sin(3*y)"``.
    variables : the names that stand for coordinates.
    limits : what is refused as too long, too deep or too large.

    Raises
    ------
    ExpressionError : the text is not an expression in these variables, or beyond the limits; says where.
    """
    if len(text) > limits.length:
        raise ExpressionError(limits.length, f"An expression has at most {limits.length} characters.")
    return Expression(_Parser(tokens(text), variables, limits).everything())


class _Parser:
    def __init__(self, pieces: list[Token], variables: Collection[str], limits: Limits) -> None:
        self.pieces = pieces
        self.variables = variables
        self.limits = limits
        self.index = 0
        self.nesting = 0
        self.known: dict[Node, Node] = {}
        self.depths: dict[int, int] = {}

    @property
    def next(self) -> Token:
        return self.pieces[self.index]

    def take(self, *marks: str) -> Token | None:
        """The next piece if it is one of these marks; moves behind it."""
        token = self.next
        if token.kind != "mark" or token.text not in marks:
            return None
        self.index += 1
        return token

    def made(self, node: Node) -> Node:
        """The node, or the equal one made before: equal parts of an expression are one object."""
        if node in self.known:
            return self.known[node]
        depth = 1 + max((self.depths[id(operand)] for operand in operands(node)), default=0)
        if depth > self.limits.depth:
            raise self.too_deep()
        if len(self.known) == self.limits.nodes:
            sentence = f"The expression has more than {self.limits.nodes} different parts."
            raise ExpressionError(self.next.position, sentence)
        self.depths[id(node)] = depth
        self.known[node] = node
        return node

    def too_deep(self) -> ExpressionError:
        sentence = f"The expression is nested more than {self.limits.depth} deep."
        return ExpressionError(self.next.position, sentence)

    def everything(self) -> Node:
        if self.next.kind == "end":
            raise ExpressionError(0, "The expression is empty.")
        root = self.sum()
        if self.next.kind != "end":
            raise self.unexpected()
        return root

    def sum(self) -> Node:
        terms = [self.product()]
        while mark := self.take("+", "-"):
            term = self.product()
            terms.append(term if mark.text == "+" else self.made(Negation(term)))
        return terms[0] if len(terms) == 1 else self.made(Sum(tuple(terms)))

    def product(self) -> Node:
        factors = [self.factor()]
        while mark := self.take("*", "/"):
            factor = self.factor()
            factors.append(factor if mark.text == "*" else self.made(Reciprocal(factor)))
        return factors[0] if len(factors) == 1 else self.made(Product(tuple(factors)))

    def factor(self) -> Node:
        self.nesting += 1
        if self.nesting > self.limits.depth:
            raise self.too_deep()
        if self.take("-"):
            node = self.made(Negation(self.factor()))
        else:
            node = self.atom()
            if self.take("^"):
                start = self.next.position
                node = self.made(Power(node, self.exponent(start)))
        self.nesting -= 1
        return node

    def exponent(self, start: int) -> Node:
        node = self.factor()
        value = exact_values(node).get(id(node))
        if value is not None and value.denominator == 1 and abs(value) > LARGEST_POWER:
            sentence = f"A whole exponent lies between -{LARGEST_POWER} and {LARGEST_POWER}."
            raise ExpressionError(start, sentence)
        return node

    def atom(self) -> Node:
        token = self.next
        if self.take("("):
            inside = self.sum()
            self.close(token)
            return inside
        if token.kind not in ("number", "name"):
            raise self.unexpected() if token.kind == "foreign" else ExpressionError(token.position, OPERAND)
        self.index += 1
        if token.kind == "number":
            return self.made(Number(number(token)))
        if token.text in self.variables:
            return self.made(Variable(token.text))
        if token.text == "pi":
            return self.made(Pi())
        if token.text in UNARY or token.text in VARIADIC:
            return self.call(token)
        names = ", ".join([*self.variables, "pi", *UNARY, *VARIADIC])
        raise ExpressionError(token.position, f"This name is not known. Known here: {names}.")

    def call(self, name: Token) -> Node:
        opening = self.next
        if not self.take("("):
            raise ExpressionError(opening.position, f"The argument of {name.text} stands in parentheses.")
        arguments: list[Node] = []
        if self.next.text != ")":
            arguments.append(self.sum())
            while self.take(","):
                arguments.append(self.sum())
        self.close(opening)
        if name.text in UNARY and len(arguments) != 1:
            raise ExpressionError(name.position, f"{name.text} takes one argument.")
        if name.text in VARIADIC and len(arguments) < 2:
            raise ExpressionError(name.position, f"{name.text} takes two or more arguments.")
        return self.made(Call(name.text, tuple(arguments)))

    def close(self, opening: Token) -> None:
        if not self.take(")"):
            if self.next.kind != "end":
                raise self.unexpected()
            place = opening.position + 1
            sentence = f"The parenthesis opened at character {place} is not closed."
            raise ExpressionError(self.next.position, sentence)

    def unexpected(self) -> ExpressionError:
        """What is wrong with the next piece, which stands where an operator or the end belongs."""
        if self.next.kind == "foreign":
            return ExpressionError(self.next.position, FOREIGN)
        sentences = {
            "**": "A power is written with ^.",
            ")": "This parenthesis was never opened.",
            ",": "A comma stands only between arguments of a function; decimals are written with a point.",
        }
        missing = "An operator is missing before this; a product is written with *."
        return ExpressionError(self.next.position, sentences.get(self.next.text, missing))
