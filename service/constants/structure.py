"""What the coefficients of a problem are like, read from the expressions themselves."""

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
