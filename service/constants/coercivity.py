"""Coercivity: a(v, v) >= C ||v||^2."""

import math
from collections.abc import Callable, Iterator
from dataclasses import replace

import numpy as np

from service.bounds.enclosure import Enclosure
from service.bounds.pointwise import controls, least_ratio, smallest_ratio
from service.bounds.refine import Budget, Step
from service.bounds.rounding import down, up
from service.constants.base import Absent, Constant, MeshAt, Narrow, Question, from_ratio
from service.constants.words import admissible, dirichlet_names, norm_words, operator_unit
from service.forms.form import Form, Pencil
from service.forms.operator import Discrete
from service.meshing.mesh import Mesh
from service.problem.request import Request


def ask(request: Request) -> Question | Absent:
    """C = tau_1 of the symmetric part a(u, u) against ||u||^2; it may be zero or negative: a result, not an error.

    Functions that oscillate faster and faster around a point x have ratios near the smallest eigenvalue of K(x)
    against the norm's G: that is an upper bound too, reached or not. Where every part of a - C ||.||^2 is
    nonnegative, C is a lower bound.
    """
    if request.norm.kind != "h1" and not dirichlet_names(request):
        return Absent("Without a Dirichlet part the gradient is no norm: constants have none. Use the norm h1.")

    def pencil(mesh: Mesh) -> Pencil:
        discrete = Discrete(request, mesh)
        return Pencil(discrete.symmetric_part, discrete.norm)

    statement = f"a(v,v) >= C ||v||^2 for {admissible(request)}; {norm_words(request)}"
    return Question(request.domain, with_parts(pencil), statement, operator_unit(request))


def with_parts(pencil: Callable[[Mesh], Pencil], answer: Callable[[Enclosure], Enclosure] = lambda tau: tau) -> Narrow:
    """The first ratio of a pencil of an operator against a norm, or a function of it."""

    def narrow(mesh_at: MeshAt, budget: Budget) -> Iterator[Step]:
        for step in from_ratio(pencil)(mesh_at, budget):
            sides = by_parts(pencil(step.mesh))
            better = replace(step, enclosure=answer(step.enclosure.intersect(sides)))
            yield better
            if better.enclosure.width <= budget.width:
                return

    return narrow


def by_parts(pencil: Pencil) -> Enclosure:
    """What comparing coefficients point by point proves of tau_1."""
    below, norm = pencil.energy.moved(-1.0), pencil.weight
    upper = smallest_ratio(pencil.energy, norm)
    lower = min(least_ratio(below, norm.moved(1.0)), *potential_ratio(below, norm))
    return Enclosure(
        down(lower, 64) if math.isfinite(lower) else -math.inf,
        up(upper, 64),
        "coefficients compared point by point",
        "oscillation around a point",
    )


def potential_ratio(form: Form, norm: Form) -> tuple[float, float]:
    """Largest t that keeps p - t w0 >= 0 everywhere; -inf where that is impossible or facet terms are negative."""
    least = controls(form.potential, form.mesh.dimension).min(axis=1)
    density = norm.potential[:, 0]
    facets = controls(form.facet, form.mesh.dimension - 1).min(axis=1)
    free = math.inf if np.all(facets[~form.dirichlet] >= 0) else -math.inf
    if np.all(density > 0):
        return float(np.min(least / density)), free
    return (math.inf if np.all(least >= 0) else -math.inf), free


COERCIVITY = Constant("coercivity", "Coercivity constant", ask)
