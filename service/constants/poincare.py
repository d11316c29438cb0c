"""Poincaré's constant: ||u|| <= C ||grad u|| for functions of zero mean."""

from dataclasses import replace

import numpy as np

from service.constants.base import Absent, Constant, Question
from service.forms.form import Pencil, laplace
from service.meshing.mesh import Mesh
from service.problem.domain import BoundaryPart
from service.problem.request import Request


def ask(request: Request) -> Question | Absent:
    """C = tau_2^(-1/2) of int |grad u|^2 against int u^2 on all of H1: a number of the domain alone."""
    free = tuple(BoundaryPart(part.name, "neumann") for part in request.domain.parts)

    def pencil(mesh: Mesh) -> Pencil:
        return laplace(mesh, np.zeros(len(mesh.facets), dtype=bool))

    statement = "||u|| <= C ||grad u|| in L2, for every u in H1 whose mean is zero, whatever its boundary values"
    return Question(replace(request.domain, parts=free), pencil, 2, statement, request.length_unit)


POINCARE = Constant("poincare", "Poincaré constant", ask)
