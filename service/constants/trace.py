"""Trace constants: the size of a function on a boundary part against its norm."""

from functools import partial

from service.constants.base import Absent, Constant, Question, inverse_root
from service.constants.structure import typical_diffusion
from service.constants.words import admissible, dirichlet_names, norm_words, trace_unit
from service.forms.form import Pencil
from service.forms.operator import Discrete
from service.meshing.mesh import Mesh
from service.problem.request import Request


def ask(request: Request) -> dict[str, Question | Absent]:
    """For each named part: C = tau_1^(-1/2) of the squared norm against int u^2 over the part."""
    return {part.name: ask_part(request, number) for number, part in enumerate(request.domain.parts)}


def ask_part(request: Request, number: int) -> Question | Absent:
    """The trace constant of one boundary part."""
    part = request.domain.parts[number]
    if part.condition == "dirichlet":
        return Absent(f"Functions vanish on {part.name}: their trace there is zero, any C >= 0 will do.")
    if request.norm.kind != "h1" and not dirichlet_names(request):
        return Absent(
            "No trace constant: without a Dirichlet part the gradient does not bound constants. Use the norm h1."
        )
    statement = f"||v||_L2({part.name}) <= C ||v|| for {admissible(request)}; {norm_words(request)}"
    narrow = inverse_root(partial(pencil, request, number))
    unit, close = trace_unit(request), frozenset({number})
    materials = typical_diffusion(request) if request.norm.kind == "diffusion" else None
    return Question(request.domain, narrow, statement, unit, close=close, materials=materials)


def pencil(request: Request, number: int, mesh: Mesh) -> Pencil:
    """The squared norm against int u^2 over one part."""
    discrete = Discrete(request, mesh)
    return Pencil(discrete.norm, discrete.boundary_mass(number))


TRACE = Constant("trace", "Trace constants of the boundary parts", ask)
