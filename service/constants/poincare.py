"""Poincaré's constant: ||u|| <= C ||grad u|| for functions of zero mean."""

from dataclasses import replace

from service.constants.base import Constant, Question, inverse_root
from service.constants.structure import typical_diffusion
from service.forms.form import Pencil
from service.forms.operator import Discrete
from service.meshing.mesh import Mesh
from service.problem.domain import BoundaryPart
from service.problem.request import Request


def ask(request: Request) -> Question:
    """C = tau_2^(-1/2) of int |grad u|^2 against int u^2 on all of H1: a number of the domain alone.

    With the norm ``diffusion`` the gradient is weighted: int K grad u . grad u.
    """
    free = tuple(BoundaryPart(part.name, "neumann") for part in request.domain.parts)
    loose = replace(request, domain=replace(request.domain, parts=free))
    weighted = request.norm.kind == "diffusion"

    def pencil(mesh: Mesh) -> Pencil:
        discrete = Discrete(loose, mesh)
        return Pencil(discrete.weighted_gradient if weighted else discrete.gradient, discrete.mass)

    gradient = "||K^(1/2) grad u||" if weighted else "||grad u||"
    statement = f"||u|| <= C {gradient} in L2, for every u in H1 whose mean is zero, whatever its boundary values"
    unit = f"{request.time_unit}^(1/2)" if weighted else request.length_unit
    materials = typical_diffusion(loose) if weighted else None
    return Question(loose.domain, inverse_root(pencil, 2), statement, unit, materials=materials)


POINCARE = Constant("poincare", "Poincaré constant", ask)
