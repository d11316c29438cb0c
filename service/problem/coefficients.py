"""Values of coefficients as they are written: numbers, expressions, matrices, vectors, lists by region."""

from collections.abc import Callable, Collection
from typing import Any, TypeVar

from service.problem.expressions.errors import ExpressionError
from service.problem.expressions.expression import Expression
from service.problem.expressions.parser import DEFAULT_LIMITS, parse
from service.problem.operator import ZERO, Matrix, Vector
from service.problem.piecewise import Piecewise
from service.problem.reading import Place, Reader, read_list, read_members, read_number
from service.problem.regions import MOST_REGIONS

LARGEST_VALUE = 1e100
"""Largest absolute value of a coefficient: products of a few must stay within double precision."""

Names = Collection[str] | None
"""The names of the regions; ``None`` where they could not be read, so that nothing is said about names."""

T = TypeVar("T")


def read_expression(value: object, place: Place) -> Expression | None:
    """A number, or a text in the language of expressions in x and y; rational constants are folded."""
    if isinstance(value, int | float) and not isinstance(value, bool):
        number = read_number(value, place, -LARGEST_VALUE, LARGEST_VALUE)
        return None if number is None else Expression.constant(number)
    if not isinstance(value, str):
        place.refuse("Must be a number, or a string with an expression in x and y.")
        return None
    try:
        expression = parse(value)
    except ExpressionError as error:
        place.refuse(str(error))
        return None
    if expression.exact is not None:
        if abs(expression.exact) > LARGEST_VALUE:
            place.refuse(f"The value must lie between {-LARGEST_VALUE:g} and {LARGEST_VALUE:g}.")
            return None
        return Expression.constant(expression.exact)
    if len(expression.text()) > DEFAULT_LIMITS.length:
        place.refuse(
            f"An expression has at most {DEFAULT_LIMITS.length} characters, with a space on both sides of every "
            "+ and - between terms."
        )
        return None
    return expression


def read_matrix(value: object, place: Place) -> Matrix | None:
    """A scalar, or two rows of two entries."""
    if not isinstance(value, list):
        scalar = read_expression(value, place)
        return None if scalar is None else (scalar, ZERO, ZERO, scalar)
    rows = read_list(value, place, read_vector, 2, 2)
    return None if rows is None else (*rows[0], *rows[1])


def read_vector(value: object, place: Place) -> Vector | None:
    """Two components."""
    found = read_list(value, place, read_expression, 2, 2)
    return None if found is None else (found[0], found[1])


def read_piecewise(value: object, place: Place, read: Reader[T], names: Names) -> Piecewise[T] | None:
    """One value for everywhere, or a list of ``{region, value}`` with exactly one entry without a region.

    That entry holds wherever no other one does, at whatever place of the list it stands.
    """
    if not is_by_region(value):
        everywhere = read(value, place)
        return None if everywhere is None else Piecewise.everywhere(everywhere)
    seen: dict[str | None, Place] = {}

    def entry(value: object, place: Place) -> tuple[str | None, T] | None:
        members = read_members(value, place, ("value",), ("region",))
        if members is None:
            return None
        region = members.read("region", name)
        found = members.read("value", read)
        if found is None or ("region" in members.values and region is None):
            return None
        first = seen.setdefault(region, place)
        if first is not place:
            kind = "has no region either" if region is None else "names the same region"
            place.refuse(f"The entry at {first.pointer} {kind}; it would never be used.")
            return None
        return region, found

    def name(value: object, place: Place) -> str | None:
        if not isinstance(value, str):
            place.refuse("Must be the name of a region.")
            return None
        if names is not None and value not in names:
            place.refuse("No region of the domain has this name.")
            return None
        return value

    entries = read_list(value, place, entry, 1, MOST_REGIONS + 1)
    if entries is None:
        return None
    if None not in seen:
        place.refuse("One entry must have no region: its value holds everywhere else.")
        return None
    return Piecewise(tuple(sorted(entries, key=lambda found: found[0] is None)))


def read_scalar(value: object, place: Place, names: Names) -> Piecewise[Expression] | None:
    """A number or an expression, or a list of such by region."""
    return read_piecewise(value, place, read_expression, names)


def is_by_region(value: object) -> bool:
    """Whether a value is written as a list by region, and not as one value, which may be a list too."""
    return isinstance(value, list) and any(isinstance(item, dict) for item in value)


def entry_places(value: object, place: Place) -> dict[str | None, tuple[object, Place]]:
    """What is written for each region (``None``: everywhere else) and where; the value has been read before."""
    if not isinstance(value, list) or not is_by_region(value):
        return {None: (value, place)}
    return {item.get("region"): (item["value"], place.at(i).at("value")) for i, item in enumerate(value)}


def expression_document(expression: Expression) -> float | str:
    """The canonical form: a number where a double is exactly the value, else the canonical text."""
    exact = expression.exact
    if exact is not None and float(exact).as_integer_ratio() == exact.as_integer_ratio():
        return float(exact)
    return expression.text()


def matrix_document(matrix: Matrix) -> Any:
    """The canonical form: a scalar where the matrix is one, else two rows."""
    k11, k12, k21, k22 = matrix
    if k11 == k22 and k12 == k21 == ZERO:
        return expression_document(k11)
    return [vector_document((k11, k12)), vector_document((k21, k22))]


def vector_document(vector: Vector) -> list[float | str]:
    """The canonical form of two components."""
    return [expression_document(component) for component in vector]


def piecewise_document(piecewise: Piecewise[T], document: Callable[[T], Any]) -> Any:
    """The canonical form: the value alone where it is the same everywhere, else a list, the default last."""
    if piecewise.uniform:
        return document(piecewise.values[0])
    return [
        {"value": document(value)} if name is None else {"region": name, "value": document(value)}
        for name, value in piecewise.entries
    ]


def scalar_document(scalar: Piecewise[Expression]) -> Any:
    """The canonical form of a number or an expression, or of a list of such by region."""
    return piecewise_document(scalar, expression_document)
