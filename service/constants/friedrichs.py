"""Friedrichs' constant: ||u|| <= C ||grad u|| for functions that vanish on the Dirichlet part."""

import math

from service.bounds.refine import Budget, enclose
from service.bounds.rounding import up
from service.constants.base import Absent, Constant, MeshAt, Question, inverse_root
from service.constants.structure import typical_diffusion
from service.constants.words import dirichlet_names
from service.forms.form import Pencil
from service.forms.operator import Discrete
from service.meshing.mesh import Mesh
from service.meshing.refine import refine
from service.problem.request import Request


def ask(request: Request) -> Question | Absent:
    """C = tau_1^(-1/2) of int |grad u|^2 against int u^2; absent without a Dirichlet part.

    With the norm ``diffusion`` the gradient is weighted: int K grad u . grad u.
    """
    names = dirichlet_names(request)
    if not names:
        return Absent(
            "No Friedrichs constant: no boundary part has the condition dirichlet, so constants are admissible "
            "and have no gradient. Ask for poincare, which bounds functions of zero mean."
        )
    weighted = request.norm.kind == "diffusion"

    def pencil(mesh: Mesh) -> Pencil:
        discrete = Discrete(request, mesh)
        return Pencil(discrete.weighted_gradient if weighted else discrete.gradient, discrete.mass)

    gradient = "||K^(1/2) grad u||" if weighted else "||grad u||"
    statement = f"||u|| <= C {gradient} in L2, for every u in H1 that vanishes on {names}"
    unit = f"{request.time_unit}^(1/2)" if weighted else request.length_unit
    materials = typical_diffusion(request) if weighted else None
    return Question(request.domain, inverse_root(pencil), statement, unit, materials=materials)


def friedrichs_bound(request: Request, mesh_at: MeshAt, budget: Budget) -> float | None:
    """C with ||v|| <= C |v| for the problem's norm |v|; None if it was not found in time."""

    def pencil(mesh: Mesh) -> Pencil:
        discrete = Discrete(request, mesh)
        return Pencil(discrete.norm, discrete.mass)

    lower = max((step.enclosure.lower for step in enclose(mesh_at, refine, pencil, 1, budget)), default=-math.inf)
    return up(1 / math.sqrt(lower)) if lower > 0 else None


FRIEDRICHS = Constant("friedrichs", "Friedrichs constant", ask)
