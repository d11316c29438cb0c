"""Inf-sup: sup_v a(u, v) / ||v|| >= C ||u||, the margin of well-posedness where coercivity is small or negative."""

import math
import time
from collections.abc import Iterator
from dataclasses import dataclass, replace

from service.bounds.enclosure import UNKNOWN, Enclosure
from service.bounds.infsup import InfSup
from service.bounds.pointwise import SLACK, doubt, smallest_ratio
from service.bounds.refine import FIRST_SIZE, Budget, Step
from service.bounds.response import response_bound
from service.bounds.rounding import down
from service.constants.base import Absent, Constant, MeshAt, Question, share
from service.constants.coercivity import with_parts
from service.constants.friedrichs import friedrichs_bound
from service.constants.structure import proportion, typical_diffusion
from service.constants.words import admissible, dirichlet_names, norm_words, operator_unit
from service.elements.reference import MAX_ORDER
from service.errors import ComputationError
from service.forms.bilinear import bilinear
from service.forms.form import Pencil
from service.forms.operator import Discrete
from service.meshing.mesh import Mesh
from service.problem.request import Request

BISECTIONS = 6
"""How often the distance below the upper bound is halved on a logarithmic scale before a proof is tried."""

COARSE = 0.02
"""Relative width to which coercivity and Friedrichs constants are found that only help."""


def ask(request: Request) -> Question | Absent:
    """C = inf sup a(u, v) / (||u|| ||v||); it is never below coercivity.

    From below by the count of ``bounds.infsup`` where K is a multiple of the gradient's weight in the norm, else by
    coercivity. From above by the response of one function, and by oscillation.
    """
    if request.norm.kind != "h1" and not dirichlet_names(request):
        return Absent("Without a Dirichlet part the gradient is no norm: constants have none. Use the norm h1.")
    functions = admissible(request).replace("every v", "every u")
    statement = f"sup over v of a(u,v) / ||v|| >= C ||u|| for {functions}; {norm_words(request)}"
    advice = "A finer level would raise the lower bound: raise limits.seconds or limits.unknowns."
    if proportion(request) is None:
        advice = (
            "Coercivity is the lower bound, for K is no multiple of the gradient's weight in the norm. It is one in "
            "the norm diffusion, or where K is the same number everywhere."
        )
    unit, materials = operator_unit(request), typical_diffusion(request)
    return Question(request.domain, Search(request).narrow, statement, unit, advice, materials=materials)


@dataclass(frozen=True)
class Search:
    """The search for the inf-sup constant of one problem."""

    request: Request

    def pencil(self, mesh: Mesh) -> Pencil:
        """a(u, u) against the squared norm."""
        discrete = Discrete(self.request, mesh)
        return Pencil(discrete.symmetric_part, discrete.norm)

    def narrow(self, mesh_at: MeshAt, budget: Budget) -> Iterator[Step]:
        """Coercivity first, then certificates on finer and finer meshes."""
        theta = proportion(self.request)
        known = Enclosure(0.0, math.inf, lower_by="nothing is below zero")
        before = budget.found.get("coercivity")
        first = mesh_at(FIRST_SIZE)
        if before is not None:
            known = known.intersect(self.simple(before, first))
            yield Step(known, first, 0, 1, len(first.points), 0.0)
        else:
            only = replace(budget, width=max(budget.width, COARSE), deadline=share(budget.deadline, 0.3))
            for step in with_parts(self.pencil)(mesh_at, budget if theta is None else only):
                known = known.intersect(self.simple(step.enclosure, step.mesh))
                yield replace(step, enclosure=known)
        if theta is None or known.width <= budget.width:
            return
        friedrichs: float | None = None
        if self.request.norm.kind != "h1":
            inner = replace(budget, width=COARSE, deadline=share(budget.deadline, 0.3))
            friedrichs = friedrichs_bound(self.request, mesh_at, inner)
            if friedrichs is None:
                return
        yield from self.certificates(mesh_at, budget, theta, friedrichs, known)

    def simple(self, coercivity: Enclosure, mesh: Mesh) -> Enclosure:
        """Coercivity below, oscillation above."""
        pencil = self.pencil(mesh)
        swing = smallest_ratio(pencil.energy, pencil.weight)
        lower = max(coercivity.lower, 0.0)
        by = f"coercivity: {coercivity.lower_by}"
        return Enclosure(lower, max(swing, lower), by, "oscillation around a point")

    def certificates(
        self, mesh_at: MeshAt, budget: Budget, theta: float, friedrichs: float | None, known: Enclosure
    ) -> Iterator[Step]:
        """Both sides on each mesh, until the width, the time or the unknowns are used up."""
        size, level, gained = FIRST_SIZE, 0, math.inf
        while True:
            begun = time.monotonic()
            try:
                mesh = mesh_at(size)
            except ComputationError:
                return
            discrete = Discrete(self.request, mesh)
            form, norm = bilinear(discrete), discrete.norm
            # K is theta G up to the rounding of theta.
            error = doubt(form, norm, friedrichs) + 4 * SLACK * theta
            if not error < 0.5 * theta:
                if not budget.affords(6 * (time.monotonic() - begun), len(mesh.facets)):
                    return
                size, level = size / 2, level + 1
                continue
            case = InfSup(discrete.symmetric_part, norm, form, theta, error)
            order = min(4 + 2 * level, MAX_ORDER - case.degree)
            unknowns = case.trial.numbering.size + len(mesh.facets) * (case.order + 1)
            # The response converges faster than the certificate: while it would hardly move it is left alone.
            if gained > 0.1 * (known.upper - known.lower):
                bound = response_bound(case, order, friedrichs)
                gained = known.upper - bound
                known = known.intersect(Enclosure(0.0, bound, upper_by=f"response of order {order}"))
                yield Step(known, mesh, level, order, unknowns, time.monotonic() - begun)
            if known.width > budget.width:
                known = known.intersect(self.certified(case, known, budget))
                yield Step(known, mesh, level, case.order, unknowns, time.monotonic() - begun)
            cost = time.monotonic() - begun
            if known.width <= budget.width or not budget.affords(6 * cost, 4 * unknowns):
                return
            size, level = size / 2, level + 1

    def certified(self, case: InfSup, known: Enclosure, budget: Budget) -> Enclosure:
        """The best lower bound that one mesh proves, searched below the upper bound."""
        if not math.isfinite(known.upper):
            return UNKNOWN
        top = known.upper**2
        low, high = math.log(budget.width / 50), math.log(max(1 - (known.lower / known.upper) ** 2, budget.width / 10))
        found = False
        for _ in range(BISECTIONS):
            middle = (low + high) / 2
            if case.seems(top * -math.expm1(middle) if middle < -1e-9 else 0.0):
                high, found = middle, True
            else:
                low = middle
        for back in range(6):
            t = top * (1 - math.exp(min(high + back, 0.0)))
            if not found or math.sqrt(max(t, 0.0)) <= known.lower or time.monotonic() > budget.deadline:
                break
            if case.proves(t):
                by = f"nonconforming minorant of order {case.order} with conforming responses, inertia count"
                return Enclosure(down(math.sqrt(t), 8), math.inf, lower_by=by)
        return UNKNOWN


INF_SUP = Constant("inf_sup", "Inf-sup constant", ask)
