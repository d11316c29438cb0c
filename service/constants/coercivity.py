"""Coercivity: a(v, v) >= C ||v||^2."""

import math
from collections.abc import Callable, Iterator
from dataclasses import replace
from typing import Any

import numpy as np

from service.bounds.enclosure import UNKNOWN, Enclosure
from service.bounds.pointwise import controls, least_ratio, smallest_ratio
from service.bounds.prospect import first_pairs
from service.bounds.refine import Budget, Step
from service.bounds.ritz import TrialSpace
from service.bounds.rounding import down, up
from service.bounds.sharpen import ritz_bound
from service.constants.base import Absent, Constant, MeshAt, Narrow, Question, from_ratio
from service.constants.structure import typical_diffusion
from service.constants.words import admissible, dirichlet_names, norm_words, operator_unit
from service.forms.form import Form, Pencil
from service.forms.operator import Discrete
from service.meshing.mesh import Mesh
from service.problem.request import Request

WITNESS_POINTS = 2000
"""Vertices up to which a function is given with the result."""


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

    def narrow(mesh_at: MeshAt, budget: Budget) -> Iterator[Step]:
        for step in with_parts(pencil)(mesh_at, budget):
            yield replace(step, more=conclusion(pencil, step))

    statement = f"a(v,v) >= C ||v||^2 for {admissible(request)}; {norm_words(request)}"
    return Question(
        request.domain, narrow, statement, operator_unit(request), materials=typical_diffusion(request)
    )


def with_parts(pencil: Callable[[Mesh], Pencil], answer: Callable[[Enclosure], Enclosure] = lambda tau: tau) -> Narrow:
    """The first ratio of a pencil of an operator against a norm or a mass, or a function of it."""

    def narrow(mesh_at: MeshAt, budget: Budget) -> Iterator[Step]:
        known, mesh = UNKNOWN, None
        for step in from_ratio(pencil)(mesh_at, budget):
            known = known.intersect(step.enclosure)
            if step.mesh is not mesh:
                mesh = step.mesh
                known = known.intersect(by_parts(pencil(mesh)))
            better = replace(step, enclosure=answer(known))
            yield better
            if better.enclosure.width <= budget.width:
                return

    return narrow


def conclusion(pencil: Callable[[Mesh], Pencil], step: Step) -> dict[str, Any]:
    """What the sign says, in words, and a function that shows it where it is negative."""
    if step.enclosure.lower > 0:
        return {"conclusion": "a is coercive: the problem is well posed for every load."}
    if step.enclosure.upper >= 0:
        return {"conclusion": "Not decided yet whether a is coercive."}
    text = "a is not coercive: there are v with a(v, v) < 0. inf_sup may still show that the problem is well posed."
    found = witness(pencil(step.mesh)) if len(step.mesh.points) <= WITNESS_POINTS else None
    return {"conclusion": text} if found is None else {"conclusion": text, "witness": found}


def witness(pencil: Pencil) -> dict[str, Any] | None:
    """A function, linear on cells, with a proved negative ratio; None where the mesh has none."""
    space = TrialSpace(pencil, 1)
    _, functions = first_pairs(space, 1)
    bound = ritz_bound(pencil, space, functions, 1)
    if not bound < 0:
        return None
    mesh, values = pencil.mesh, np.zeros(len(pencil.mesh.points))
    values[mesh.cells] = functions[:, :, 0]
    points = np.asarray(mesh.origin) + mesh.unit * mesh.points
    return {
        "points": points.tolist(),
        "triangles": mesh.cells.tolist(),
        "values": (values / np.max(np.abs(values))).tolist(),
        "ratio": float(bound),
    }


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
