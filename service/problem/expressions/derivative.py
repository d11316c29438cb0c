"""Exact symbolic derivatives of trees, one rule per kind of node.

The derivative of abs, min and max is the weak derivative of a Lipschitz function: right wherever the function
has a derivative, and a value between the one-sided ones elsewhere (Rademacher 1919; Gilbarg and Trudinger,
Elliptic Partial Differential Equations of Second Order, lemma 7.6). Its jumps have no derivative that is a
function, and none is made up.
"""

from fractions import Fraction

from service.problem.expressions.build import added, divided, known_value, multiplied, negated, number, raised
from service.problem.expressions.errors import DerivativeError
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
    ordered,
)

ZERO = number(0)
JUMP = "A derivative of abs, min or max jumps; it has no derivative that is a function."


def derivative(root: Node, variable: str) -> Node:
    """The partial derivative of a tree; parts of the tree are shared with it, not copied.

    Raises
    ------
    DerivativeError : the tree holds a ``Sign`` or ``Choose`` that depends on the variable.
    """
    constants = exact_values(root)
    slopes: dict[int, Node] = {}
    for node in ordered(root):
        slopes[id(node)] = _slope(node, variable, slopes, constants)
    return slopes[id(root)]


def _slope(node: Node, variable: str, slopes: dict[int, Node], constants: dict[int, Fraction]) -> Node:
    """The derivative of one node from those of its operands."""
    match node:
        case Number() | Pi():
            return ZERO
        case Variable(name):
            return number(1) if name == variable else ZERO
        case Negation(operand):
            return negated(slopes[id(operand)])
        case Sum(terms):
            return added(*(slopes[id(term)] for term in terms))
        case Reciprocal(operand):
            return divided(negated(slopes[id(operand)]), raised(operand, number(2)))
        case Product(factors):
            return _product_slope(factors, slopes)
        case Power(base, exponent):
            return _power_slope(base, exponent, slopes, constants)
        case Call(function, arguments) if function in VARIADIC:
            return _extremum_slope(function, arguments, slopes)
        case Call(function, (argument,)):
            return multiplied(_outer_slope(function, argument, node), slopes[id(argument)])
        case Call(function):
            raise ValueError(f"{function} takes one argument")
        case Sign(operand):
            return _unless_jumping(operand, slopes, ZERO)
        case Choose(condition, positive, negative):
            chosen = _chosen(condition, slopes[id(positive)], slopes[id(negative)])
            return _unless_jumping(condition, slopes, chosen)


def _product_slope(factors: tuple[Node, ...], slopes: dict[int, Node]) -> Node:
    """Product rule, by halves: the size grows like n log n, not like the square."""
    if len(factors) == 1:
        return slopes[id(factors[0])]
    left, right = factors[: len(factors) // 2], factors[len(factors) // 2 :]
    return added(
        multiplied(_product_slope(left, slopes), *right),
        multiplied(*left, _product_slope(right, slopes)),
    )


def _power_slope(base: Node, exponent: Node, slopes: dict[int, Node], constants: dict[int, Fraction]) -> Node:
    """p a^(p-1) a' for an exponent p that does not vary, a^p (p' log a + p a'/a) elsewhere."""
    base_slope, exponent_slope = slopes[id(base)], slopes[id(exponent)]
    if exponent_slope == ZERO:
        value = constants.get(id(exponent))
        scale = exponent if value is None else number(value)
        return multiplied(scale, raised(base, added(scale, number(-1))), base_slope)
    relative = added(
        multiplied(exponent_slope, Call("log", (base,))),
        divided(multiplied(exponent, base_slope), base),
    )
    return multiplied(Power(base, exponent), relative)


def _outer_slope(function: str, argument: Node, node: Node) -> Node:
    """The derivative of a function of one argument; ``node`` is the function applied to it."""
    match function:
        case "sin":
            return Call("cos", (argument,))
        case "cos":
            return negated(Call("sin", (argument,)))
        case "tan":
            return added(number(1), raised(node, number(2)))
        case "tanh":
            return added(number(1), negated(raised(node, number(2))))
        case "exp":
            return node
        case "log":
            return divided(number(1), argument)
        case "sqrt":
            return divided(number(Fraction(1, 2)), node)
        case "abs":
            return Sign(argument)
        case _:
            raise ValueError(f"no function of this language: {function}")


def _extremum_slope(function: str, arguments: tuple[Node, ...], slopes: dict[int, Node]) -> Node:
    """The derivative of the least or greatest argument, two by two."""
    best, slope = arguments[0], slopes[id(arguments[0])]
    for other in arguments[1:]:
        lead = added(other, negated(best)) if function == "min" else added(best, negated(other))
        slope = _chosen(lead, slope, slopes[id(other)])
        best = Call(function, (best, other))
    return slope


def _chosen(condition: Node, positive: Node, negative: Node) -> Node:
    """A choice, where there is one to make: equal constants need none."""
    value = known_value(positive)
    if value is not None and value == known_value(negative):
        return positive
    return Choose(condition, positive, negative)


def _unless_jumping(condition: Node, slopes: dict[int, Node], slope: Node) -> Node:
    if slopes[id(condition)] != ZERO:
        raise DerivativeError(JUMP)
    return slope
