"""An expression: what a text means, ready to be read in any algebra and differentiated."""

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import TypeVar

from service.problem.expressions import build
from service.problem.expressions.algebra import Algebra, read
from service.problem.expressions.derivative import derivative
from service.problem.expressions.exact import exact_values
from service.problem.expressions.nodes import Node, Variable, ordered
from service.problem.expressions.text import rendered

T = TypeVar("T")


@dataclass(frozen=True)
class Expression:
    """A function of the coordinates. Equal expressions have equal trees (and equal texts).

    root : its tree.
    """

    root: Node

    @staticmethod
    def constant(value: int | float | Fraction) -> "Expression":
        """A constant, exactly; ValueError or OverflowError for a float that is not finite."""
        return Expression(build.number(Fraction(value)))

    def read(self, algebra: Algebra[T], values: Mapping[str, T]) -> T:
        """The value in an algebra; ``values`` holds what the variables stand for.

        A constant expression comes back in the shape in which the algebra makes constants.

        Raises
        ------
        KeyError : a variable of the expression is missing among ``values``.
        """
        return read(self.root, algebra, values)

    def derivative(self, variable: str) -> "Expression":
        """The exact partial derivative; the weak one where abs, min or max occur.

        Raises
        ------
        DerivativeError : the expression is itself such a weak derivative, with jumps.
        """
        return Expression(derivative(self.root, variable))

    def text(self) -> str:
        """The canonical text; ``parse`` makes the same tree of it.

        Derivatives of abs, min and max contain ``sign(...)`` and ``choose(...)``, which ``parse`` refuses.
        """
        return rendered(self.root)

    def variables(self) -> frozenset[str]:
        """The names that occur."""
        return frozenset(node.name for node in ordered(self.root) if isinstance(node, Variable))

    @property
    def is_constant(self) -> bool:
        """Whether no variable occurs."""
        return not self.variables()

    @property
    def exact(self) -> Fraction | None:
        """The value, where the expression is a rational constant that can be folded exactly."""
        return exact_values(self.root).get(id(self.root))

    def __neg__(self) -> "Expression":
        return Expression(build.negated(self.root))

    def __add__(self, other: "Expression") -> "Expression":
        return Expression(build.added(self.root, other.root))

    def __sub__(self, other: "Expression") -> "Expression":
        return Expression(build.added(self.root, build.negated(other.root)))

    def __mul__(self, other: "Expression") -> "Expression":
        return Expression(build.multiplied(self.root, other.root))

    def __truediv__(self, other: "Expression") -> "Expression":
        return Expression(build.divided(self.root, other.root))
