"""Continuity: |a(u, v)| <= C ||u|| ||v||.

Proved from above in several ways, of which the least counts:

- plain: at every point, (b . grad u) v and c u v against the norm's two parts, and facet terms by their trace constant;
- skew: the same with half of (b . grad u) v - u (b . grad v) for (b . grad u) v, what that leaves added to c and r;
- symbol: constant coefficients and functions that vanish all round extend by zero to the plane, where waves decide;
- energy: where K = theta G, a(u, .) = theta (u, .) + k(u, .) with |k(u, .)|^2 <= int m u^2, a ratio of forms;
- symmetric: for symmetric a, C is the largest ratio |a(v, v)| / ||v||^2 itself.

From below: oscillation around a point, and pairs of conforming functions.
"""

import math
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace

import numpy as np

from service.bounds.enclosure import UNKNOWN, Enclosure
from service.bounds.pairing import PairingSpace
from service.bounds.pointwise import controls, facet_doubt, facet_size, oscillation, strongest
from service.bounds.refine import FIRST_SIZE, Budget, Step, enclose
from service.bounds.ritz import TrialSpace
from service.bounds.rounding import down, up
from service.bounds.symbol import symbol_bound
from service.constants.base import Absent, Constant, MeshAt, Question, share
from service.constants.coercivity import with_parts
from service.constants.friedrichs import friedrichs_bound
from service.constants.structure import constant_coefficients, held_all_round, proportion, symmetric, typical_diffusion
from service.constants.words import admissible, dirichlet_names, norm_words, operator_unit
from service.forms.bilinear import Bilinear, bilinear
from service.forms.form import Form, Pencil, constant_form
from service.forms.operator import Discrete
from service.meshing.mesh import Mesh
from service.meshing.refine import refine
from service.problem.operator import Field
from service.problem.request import Request

PAIR_ORDER = 3
"""Order of the functions that show how large a(u, v) can be."""

COARSE = 0.02
"""Relative width to which trace and Friedrichs constants are found that enter an upper bound."""

POINTS = 60_000
"""Cells up to which a mesh is refined to read coefficients from it."""


def ask(request: Request) -> Question | Absent:
    """C = sup a(u, v) / (||u|| ||v||)."""
    if request.norm.kind != "h1" and not dirichlet_names(request):
        return Absent("Without a Dirichlet part the gradient is no norm: constants have none. Use the norm h1.")
    functions = admissible(request).replace("every v", "all u, v").replace("vanishes", "vanish")
    statement = f"|a(u,v)| <= C ||u|| ||v|| for {functions}; {norm_words(request)}"
    advice = "The upper bounds for operators that are not symmetric are not sharp: more time helps little."
    unit = operator_unit(request)
    if symmetric(request):
        advice = Question.advice
    materials = typical_diffusion(request)
    return Question(request.domain, Continuity(request).narrow, statement, unit, advice, materials=materials)


@dataclass(frozen=True)
class Continuity:
    """The ways to bound the continuity constant of one problem."""

    request: Request

    def narrow(self, mesh_at: MeshAt, budget: Budget) -> Iterator[Step]:
        """Cheap bounds first, then the one that fits the problem, then traces where they are needed."""
        begun = time.monotonic()
        mesh, size = mesh_at(FIRST_SIZE), FIRST_SIZE
        # On large cells the polynomials that stand for K may not be positive.
        while not np.all(np.linalg.eigvalsh(Discrete(self.request, mesh).norm.moved(-1.0).diffusion_floor) > 0):
            size /= 2
            mesh = mesh_at(size)

        def fine(asked: float) -> Mesh:
            return mesh_at(min(asked, size))

        known = UNKNOWN
        last: Step | None = None
        for found, level, order in self.bounds(mesh, fine, budget):
            known = known.intersect(found)
            last = Step(known, mesh, level, order, 3 * len(mesh.points), time.monotonic() - begun)
            yield last
            if known.width <= budget.width:
                return

    def bounds(self, mesh: Mesh, mesh_at: MeshAt, budget: Budget) -> Iterator[tuple[Enclosure, int, int]]:
        """Enclosures one after the other, with level and order."""
        request = self.request
        bare = request.norm.kind != "h1"
        yield self.below(mesh), 0, PAIR_ORDER
        if held_all_round(request) and constant_coefficients(request) and not bare:
            yield self.symbol(), 0, 0
        last = budget.deadline
        if symmetric(request):
            yield from self.by_ratio(mesh_at, replace(budget, deadline=share(last, 0.9)))
            return
        if proportion(request) is not None:
            inner = replace(budget, width=max(1e-3, budget.width), deadline=share(last, 0.4))
            yield from self.by_energy(mesh_at, inner)
        friedrichs: float | None = None
        if bare:
            inner = replace(budget, width=COARSE, deadline=share(last, 0.3))
            friedrichs = friedrichs_bound(request, mesh_at, inner)
            if friedrichs is None:
                return
        fine = mesh
        while 4 * len(fine.cells) <= POINTS:
            fine = refine(fine)
        discrete = Discrete(request, fine)
        for skew, name in ((True, "skew part"), (False, "plain bounds")):
            form = bilinear(discrete, skew)
            top = strongest(form, discrete.norm, skew, friedrichs)
            traces = self.traces(mesh_at, skew, replace(budget, width=COARSE, deadline=share(last, 0.3)))
            if traces is not None:
                yield Enclosure(-math.inf, up(top + traces), upper_by=f"coefficients point by point, {name}"), 0, 1

    def below(self, mesh: Mesh) -> Enclosure:
        """What oscillation and a pair of conforming functions show."""
        discrete = Discrete(self.request, mesh)
        form, norm = bilinear(discrete), discrete.norm
        swing = down(oscillation(discrete.symmetric_part, norm))
        found = Enclosure(swing, math.inf, lower_by="oscillation around a point")
        space = PairingSpace(form, TrialSpace(Pencil(norm, norm), PAIR_ORDER))
        u, v = space.largest()
        value, error = space.value(u, v)
        raised = space.trial.gram(norm.moved(1.0), np.stack([u, v], axis=2))
        lengths = np.sqrt(np.diag(raised.matrix) + np.diag(raised.error))
        pair = down((abs(value) - error) / float(lengths[0] * lengths[1]), 16)
        return found.intersect(Enclosure(pair, math.inf, lower_by=f"a pair of functions, order {PAIR_ORDER}"))

    def symbol(self) -> Enclosure:
        """Waves in the plane."""
        operator, length = self.request.operator, self.request.norm.length_scale
        k11, k12, k21, k22 = (float(value.exact or 0) for value in operator.diffusion.values[0])
        matrix = np.array([[k11, k12], [k21, k22]]) / length**2
        flow = np.zeros(2)
        velocity = operator.velocity
        if isinstance(velocity, Field):
            flow = np.array([float(part.exact or 0) for part in velocity.components.values[0]]) / length
        bound = symbol_bound(matrix, flow, float(operator.reaction.values[0].exact or 0), 1.0)
        return Enclosure(-math.inf, bound, upper_by="symbol of the operator in the plane")

    def by_ratio(self, mesh_at: MeshAt, budget: Budget) -> Iterator[tuple[Enclosure, int, int]]:
        """Symmetric a: the larger of both ends of its spectrum, in turn."""
        first = Discrete(self.request, mesh_at(FIRST_SIZE))
        above = 2 * oscillation(first.symmetric_part, first.norm)

        def pencil(mesh: Mesh) -> Pencil:
            discrete = Discrete(self.request, mesh)
            return Pencil(discrete.symmetric_part, discrete.norm)

        lowest, highest = UNKNOWN, UNKNOWN
        last = budget.deadline
        for step in with_parts(lambda mesh: reflected(pencil(mesh), above), above_minus(above))(
            mesh_at, replace(budget, deadline=share(last, 0.5))
        ):
            highest = step.enclosure
            yield larger(lowest, highest), step.level, step.order
        for step in with_parts(pencil)(mesh_at, replace(budget, deadline=last)):
            lowest = step.enclosure
            yield larger(lowest, highest), step.level, step.order

    def by_energy(self, mesh_at: MeshAt, budget: Budget) -> Iterator[tuple[Enclosure, int, int]]:
        """sup of theta^2 + 2 theta k(u, u) + int m u^2 over |u|^2, and what k has beside m."""
        theta = proportion(self.request)
        assert theta is not None
        left = self.leftover(mesh_at, budget)
        if left is None:
            return

        above = 2 * theta**2

        def answer(tau: Enclosure) -> Enclosure:
            found = above_minus(above)(tau)
            high = up(math.sqrt(max(found.upper, 0.0))) if math.isfinite(found.upper) else math.inf
            return Enclosure(-math.inf, up(high + left), upper_by=f"energy of the first-order part ({found.upper_by})")

        for step in with_parts(lambda mesh: reflected(self.energy(mesh, theta), above), answer)(mesh_at, budget):
            yield step.enclosure, step.level, step.order

    def energy(self, mesh: Mesh, theta: float) -> Pencil:
        """The form above against the norm."""
        discrete = Discrete(self.request, mesh)
        norm, whole = discrete.norm, discrete.symmetric_part
        body = whole.plus(self.beside(discrete), -1.0)
        form = bilinear(discrete)
        lower = norm.moved(-1.0)
        metric = np.linalg.eigvalsh(lower.diffusion_floor)[:, 0]
        root = np.linalg.inv(np.linalg.cholesky(lower.diffusion_floor))
        flow = np.linalg.norm(np.einsum("nij,ncj->nci", root, controls(form.velocity, 2)), axis=2).max(axis=1)
        drag = (flow + form.velocity_error / np.sqrt(metric)) ** 2
        if self.request.norm.kind == "h1":
            rest, error = self.stray(discrete, theta)
            drag = drag + (rest + error) ** 2 / lower.potential[:, 0]
        mass = constant_form(mesh, discrete.dirichlet, potential=drag * (1 + 1e-10))
        return Pencil(body.times(2 * theta).plus(norm, -(theta**2)).plus(mass, 1.0), norm)

    def stray(self, discrete: Discrete, theta: float) -> tuple[np.ndarray, np.ndarray]:
        """(nc,) largest |c - div b - theta w0| (convective form; c in conservative form), and the error."""
        part = discrete.potential(discrete.conserved - 1.0)
        modes = part.modes.copy()
        modes[:, 0] -= theta * discrete.norm.potential[:, 0]
        return np.abs(controls(modes, 2)).max(axis=1), part.error + 1e-15 * np.abs(theta)

    def beside(self, discrete: Discrete) -> Form:
        """The facet terms of -int u b . grad v + ... that are left when the flow is moved to v, as a form."""
        terms = discrete.facet_terms(1.0, 1.0 - discrete.conserved).times(1 / discrete.mesh.unit)
        zero = constant_form(discrete.mesh, discrete.dirichlet)
        return replace(zero, facet=terms.modes, facet_error=terms.error)

    def leftover(self, mesh_at: MeshAt, budget: Budget) -> float | None:
        """A bound of what ``energy`` does not see of k: facet terms, and c against a norm of gradients only."""
        theta = proportion(self.request)
        assert theta is not None
        total = self.facet_bound(mesh_at, budget, self.beside)
        if total is None or self.request.norm.kind == "h1":
            return total
        discrete = Discrete(self.request, mesh_at(FIRST_SIZE))
        rest, error = self.stray(discrete, theta)
        size = float(np.max(rest + error))
        if size == 0.0:
            return total
        friedrichs = friedrichs_bound(self.request, mesh_at, replace(budget, width=COARSE))
        return None if friedrichs is None else up(total + size * friedrichs**2)

    def traces(self, mesh_at: MeshAt, skew: bool, budget: Budget) -> float | None:
        """A bound of the facet terms of the form against the norm."""
        return self.facet_bound(mesh_at, budget, lambda discrete: bilinear(discrete, skew))

    def facet_bound(
        self, mesh_at: MeshAt, budget: Budget, terms: Callable[[Discrete], Form | Bilinear]
    ) -> float | None:
        """sup of int |r| u^2 over facets against |u|^2; None if it was not found in time."""

        def pencil(mesh: Mesh) -> Pencil:
            discrete = Discrete(self.request, mesh)
            return Pencil(discrete.norm, constant_form(mesh, discrete.dirichlet, facet=facet_size(terms(discrete))))

        first = Discrete(self.request, mesh_at(FIRST_SIZE))
        size = facet_size(terms(first))
        if not np.any(size):
            return 0.0
        # What is there by rounding only has no ratio worth an eigenvalue.
        typical = oscillation(first.symmetric_part, first.norm)
        least = facet_doubt(first.norm, size, typical)
        if least <= 1e-5 * typical:
            return least
        lower = max((step.enclosure.lower for step in enclose(mesh_at, refine, pencil, 1, budget)), default=-math.inf)
        return up(1 / lower) if lower > 0 else None


def reflected(pencil: Pencil, above: float) -> Pencil:
    """(above B - A, B): its smallest ratio is ``above`` less the largest of (A, B), and its G is positive."""
    return Pencil(pencil.weight.times(above).plus(pencil.energy, -1.0), pencil.weight)


def above_minus(above: float) -> Callable[[Enclosure], Enclosure]:
    """The largest ratio from the smallest of the reflected pencil."""

    def answer(tau: Enclosure) -> Enclosure:
        return Enclosure(down(above - tau.upper), up(above - tau.lower), tau.upper_by, tau.lower_by)

    return answer


def larger(lowest: Enclosure, highest: Enclosure) -> Enclosure:
    """max(|inf|, |sup|) of ratios from enclosures of their infimum and their supremum."""
    low, high = max(-lowest.upper, highest.lower, 0.0), max(-lowest.lower, highest.upper)
    name = lowest.lower_by if -lowest.lower > highest.upper else highest.upper_by
    return Enclosure(low, high, "ratio of a function", f"largest ratio |a(v,v)|/||v||^2: {name}")


CONTINUITY = Constant("continuity", "Continuity constant", ask)
