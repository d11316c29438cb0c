"""Friedrichs' constant: ||u|| <= C ||grad u|| for functions that vanish on the Dirichlet part."""

import numpy as np

from service.constants.base import Absent, Constant, Question
from service.forms.form import Pencil, laplace
from service.meshing.mesh import Mesh
from service.problem.request import Request


def ask(request: Request) -> Question | Absent:
    """C = tau_1^(-1/2) of int |grad u|^2 against int u^2; absent without a Dirichlet part."""
    held = [i for i, part in enumerate(request.domain.parts) if part.condition == "dirichlet"]
    if not held:
        return Absent(
            "No Friedrichs constant: no boundary part has the condition dirichlet, so constants are admissible "
            "and have no gradient. Ask for poincare, which bounds functions of zero mean."
        )

    def pencil(mesh: Mesh) -> Pencil:
        return laplace(mesh, np.isin(mesh.part, held))

    names = ", ".join(request.domain.parts[i].name for i in held)
    statement = f"||u|| <= C ||grad u|| in L2, for every u in H1 that vanishes on {names}"
    return Question(request.domain, pencil, 1, statement, request.length_unit)


FRIEDRICHS = Constant("friedrichs", "Friedrichs constant", ask)
