"""Energy decay rate: solutions of the homogeneous time-dependent problem decay at least like exp(-C t)."""

from service.constants.base import Constant, Question
from service.constants.coercivity import with_parts
from service.constants.structure import typical_diffusion
from service.constants.words import admissible
from service.forms.form import Pencil
from service.forms.operator import Discrete
from service.meshing.mesh import Mesh
from service.problem.request import Request


def ask(request: Request) -> Question:
    """C = tau_1 of the symmetric part a(u, u) against int u^2; it may be negative, then energy may grow."""

    def pencil(mesh: Mesh) -> Pencil:
        discrete = Discrete(request, mesh)
        return Pencil(discrete.symmetric_part, discrete.mass)

    statement = f"a(v,v) >= C |v|^2 in L2 for {admissible(request)}: without load, |u(t)| <= exp(-C t) |u(0)|"
    unit, materials = f"1/{request.time_unit}", typical_diffusion(request)
    return Question(request.domain, with_parts(pencil), statement, unit, materials=materials)


DECAY_RATE = Constant("decay_rate", "Energy decay rate", ask)
