"""One reading for every purpose: a tree is evaluated in whatever can add, multiply, apply functions."""

from collections import Counter
from collections.abc import Mapping
from fractions import Fraction
from functools import reduce
from itertools import groupby
from typing import Generic, Protocol, TypeVar

from service.problem.expressions.exact import exact_values
from service.problem.expressions.nodes import (
    VARIADIC,
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
    operands,
    ordered,
)

T = TypeVar("T")


class Algebra(Protocol[T]):
    """What values of type T must be able to do for an expression to be read in them.

    ``constant`` gets exact rationals, so that an enclosing algebra can enclose 0.1, which no double is.
    ``choose`` is ``positive`` where ``condition`` > 0 and ``negative`` where it is < 0.
    """

    def constant(self, value: Fraction) -> T: ...
    def pi(self) -> T: ...
    def add(self, a: T, b: T) -> T: ...
    def subtract(self, a: T, b: T) -> T: ...
    def multiply(self, a: T, b: T) -> T: ...
    def divide(self, a: T, b: T) -> T: ...
    def negate(self, a: T) -> T: ...
    def integer_power(self, a: T, exponent: int) -> T: ...
    def sin(self, a: T) -> T: ...
    def cos(self, a: T) -> T: ...
    def tan(self, a: T) -> T: ...
    def exp(self, a: T) -> T: ...
    def log(self, a: T) -> T: ...
    def sqrt(self, a: T) -> T: ...
    def tanh(self, a: T) -> T: ...
    def absolute(self, a: T) -> T: ...
    def minimum(self, a: T, b: T) -> T: ...
    def maximum(self, a: T, b: T) -> T: ...
    def sign(self, a: T) -> T: ...
    def choose(self, condition: T, positive: T, negative: T) -> T: ...


def read(root: Node, algebra: Algebra[T], values: Mapping[str, T]) -> T:
    """The value of a tree, its variables standing for ``values``.

    Rational constants are folded exactly first. Whatever occurs several times is read once, and values are
    dropped after their last use.

    Raises
    ------
    KeyError : a variable of the tree has no value.
    """
    return _Reading(root, algebra, values).result()


class _Reading(Generic[T]):
    """One pass over a tree in one algebra."""

    def __init__(self, root: Node, algebra: Algebra[T], values: Mapping[str, T]) -> None:
        self.root = root
        self.algebra = algebra
        self.values = values
        self.constants = exact_values(root)
        self.found: dict[int, T] = {}

    def result(self) -> T:
        order = ordered(self.root, self.below)
        uses = Counter(id(operand) for node in order for operand in self.below(node))
        for node in order:
            self.found[id(node)] = self.value(node)
            for operand in self.below(node):
                uses[id(operand)] -= 1
                if not uses[id(operand)]:
                    del self.found[id(operand)]
        return self.found[id(self.root)]

    def below(self, node: Node) -> tuple[Node, ...]:
        """The nodes whose values make the value of a node."""
        if id(node) in self.constants:
            return ()
        match node:
            case Sum(terms):
                return (terms[0], *(bare(term, Negation) for term in terms[1:]))
            case Product(factors):
                return tuple(bare(factor, Reciprocal) for factor in factors)
            case Power(base, exponent) if self.half_steps(exponent) is not None:
                return (base,)
            case _:
                return operands(node)

    def half_steps(self, exponent: Node) -> Fraction | None:
        """An exponent that whole powers and a square root can do, ``None`` for any other."""
        value = self.constants.get(id(exponent))
        return value if value is not None and value.denominator in (1, 2) else None

    def value(self, node: Node) -> T:
        """The value of a node from those of the nodes below it."""
        algebra = self.algebra
        if id(node) in self.constants:
            return algebra.constant(self.constants[id(node)])
        below = [self.found[id(operand)] for operand in self.below(node)]
        match node:
            case Number(exact):
                return algebra.constant(exact)
            case Pi():
                return algebra.pi()
            case Variable(name):
                return self.values[name]
            case Negation():
                return algebra.negate(below[0])
            case Reciprocal():
                return algebra.divide(algebra.constant(Fraction(1)), below[0])
            case Sum(terms):
                result = below[0]
                for term, value in zip(terms[1:], below[1:], strict=True):
                    subtracts = isinstance(term, Negation)
                    result = (algebra.subtract if subtracts else algebra.add)(result, value)
                return result
            case Product(factors):
                return self.product(factors)
            case Power(_, exponent):
                return self.power(below, self.half_steps(exponent))
            case Call(function, _):
                return self.call(function, below)
            case Sign():
                return algebra.sign(below[0])
            case Choose():
                return algebra.choose(*below)

    def product(self, factors: tuple[Node, ...]) -> T:
        """Factors from left to right; a run of equal ones is a power, so that intervals know x*x >= 0."""
        runs = [list(run) for _, run in groupby(factors, id)]
        values = [self.found[id(bare(run[0], Reciprocal))] for run in runs]
        powers = [
            value if len(run) == 1 else self.algebra.integer_power(value, len(run))
            for run, value in zip(runs, values, strict=True)
        ]
        result = powers[0]
        for run, power in zip(runs[1:], powers[1:], strict=True):
            divides = isinstance(run[0], Reciprocal)
            result = (self.algebra.divide if divides else self.algebra.multiply)(result, power)
        return result

    def power(self, below: list[T], exponent: Fraction | None) -> T:
        """Whole powers by multiplication, halves of them through the root, others through the logarithm."""
        algebra = self.algebra
        if exponent is None:
            base, power = below
            return algebra.exp(algebra.multiply(power, algebra.log(base)))
        base = below[0] if exponent.denominator == 1 else algebra.sqrt(below[0])
        return base if exponent.numerator == 1 else algebra.integer_power(base, exponent.numerator)

    def call(self, function: str, below: list[T]) -> T:
        """A function of the language."""
        algebra = self.algebra
        if function in VARIADIC:
            return reduce(algebra.minimum if function == "min" else algebra.maximum, below)
        unary = {
            "sin": algebra.sin,
            "cos": algebra.cos,
            "tan": algebra.tan,
            "exp": algebra.exp,
            "log": algebra.log,
            "sqrt": algebra.sqrt,
            "abs": algebra.absolute,
            "tanh": algebra.tanh,
        }
        return unary[function](*below)


def bare(node: Node, mark: type[Negation] | type[Reciprocal]) -> Node:
    """What stands under a mark that the sum or product around the node takes care of."""
    return node.operand if isinstance(node, mark) else node
