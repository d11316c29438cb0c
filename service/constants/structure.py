"""What the coefficients of a problem are like, read from the expressions themselves."""

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from service.problem.expressions.expression import Expression
from service.problem.expressions.readings import values
from service.problem.operator import Field
from service.problem.request import Request


def symmetric_diffusion(request: Request) -> bool:
    """Whether K is symmetric everywhere, by its expressions."""
    return all(matrix[1] == matrix[2] for matrix in request.operator.diffusion.values)


def symmetric(request: Request) -> bool:
    """Whether a(u, v) = a(v, u)."""
    return request.operator.velocity is None and symmetric_diffusion(request)


def proportion(request: Request) -> float | None:
    """theta with K = theta G everywhere, G the gradient's weight in the norm; None where there is none."""
    if not symmetric_diffusion(request):
        return None
    if request.norm.kind == "diffusion":
        return 1.0
    scalars = set()
    for k11, k12, k21, k22 in request.operator.diffusion.values:
        if k11.exact is None or k12.exact != 0 or k21.exact != 0 or k11.exact != k22.exact:
            return None
        scalars.add(k11.exact)
    if len(scalars) != 1:
        return None
    return float(scalars.pop()) / (request.norm.length_scale**2 if request.norm.kind == "h1" else 1.0)


def constant_coefficients(request: Request) -> bool:
    """Whether diffusion, velocity and reaction are one constant each, and no part exchanges."""
    operator = request.operator
    uniform = operator.diffusion.uniform and operator.reaction.uniform
    values = [*operator.diffusion.values[0], operator.reaction.values[0]]
    if isinstance(operator.velocity, Field):
        uniform = uniform and operator.velocity.components.uniform
        values += operator.velocity.components.values[0]
    elif operator.velocity is not None:
        return False
    return uniform and all(value.exact is not None for value in values)


def held_all_round(request: Request) -> bool:
    """Whether functions vanish on the whole boundary."""
    return all(part.condition == "dirichlet" for part in request.domain.parts)


def typical_diffusion(request: Request) -> Callable[[NDArray[np.bool_]], NDArray[np.float64]] | None:
    """How well each region conducts, roughly: for meshes only. None where K is stated once for all places.

    The root of the determinant of sym K at the middle of the domain, by memberships (n, R) in the regions.
    """
    diffusion = request.operator.diffusion
    if diffusion.uniform:
        return None
    middle = request.domain.points.mean(axis=0)

    def at(expression: Expression) -> float:
        return float(values(expression, middle[:, None])[0])

    sizes = []
    for k11, k12, k21, k22 in diffusion.values:
        size = at(k11) * at(k22) - ((at(k12) + at(k21)) / 2) ** 2
        sizes.append(np.sqrt(size) if np.isfinite(size) and size > 0 else 1.0)
    names = [region.name for region in request.domain.regions]

    def typical(inside: NDArray[np.bool_]) -> NDArray[np.float64]:
        return np.asarray(np.array(sizes)[diffusion.indices(names, inside)])

    return typical
