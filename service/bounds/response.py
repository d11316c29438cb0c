"""How strongly the weakest function responds: an upper bound of inf-sup, by the hypercircle."""

import math
from collections.abc import Callable
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from service.bounds.condensed import Condensed
from service.bounds.hypercircle import Load, dual_norm
from service.bounds.infsup import InfSup
from service.bounds.pairing import PairingSpace, flow_of
from service.bounds.pointwise import facet_doubt
from service.bounds.ritz import TrialSpace
from service.bounds.rounding import gamma, up
from service.elements.advection import ADVECTION_ERROR, ImageReference, image_reference
from service.elements.reference import MAX_ORDER, magnitude, scalar_norms
from service.forms.form import Form, Pencil

Array = NDArray[np.float64]


def response_bound(case: InfSup, order: int, friedrichs: float | None) -> float:
    """An upper bound of inf |Au| / |u|: |Au| of one function, by the hypercircle.

    The function is the weakest one of trial functions of ``order``; infinite where the form is singular on them or
    coefficients need too high an order.
    """
    high = order + case.degree
    if high > MAX_ORDER:
        return math.inf
    mesh, norm = case.form.mesh, case.norm
    trial = TrialSpace(Pencil(norm, norm), order)
    pairing = PairingSpace(case.form, trial)
    u = pairing.smallest()
    if not np.all(np.isfinite(u)):
        return math.inf
    jacobian = norm.jacobian
    image = image_reference(mesh.dimension, order, case.degree)
    flow = flow_of(case.form)
    weight = case.form.reaction.copy()
    weight[:, 0] -= case.theta * norm.potential[:, 0]
    weight *= jacobian[:, None]

    def source(size: Callable[[Array], Array], tensor: Callable[[Array], Array]) -> Array:
        values = size(u)
        drift = np.einsum("cma,mali,ci->cl", size(flow), tensor(image.slopes[: flow.shape[1]]), values, optimize=True)
        rest = np.einsum("cm,mli,ci->cl", size(weight), tensor(image.values[: weight.shape[1]]), values, optimize=True)
        return np.asarray(drift + rest)

    relative = 4 * ADVECTION_ERROR + gamma(8 * u.shape[1] + 8 * flow.shape[1] * mesh.dimension)
    given = source(np.asarray, np.asarray)
    facet, rounded = facet_load(case, image, u, high)
    response = np.zeros_like(given)
    if friedrichs is None:
        numbering = trial.numbering
        local = np.einsum("cij,cj->ci", pairing.matrix - case.theta * trial.weight, u)
        right = numbering.collect(local[:, :, None])
        system = Condensed.build(trial.weight, numbering)
        riesz = numbering.spread(system.solve(right))[:, :, 0]
        moments = riesz @ trial.reference.moments.T
        response[:, : moments.shape[1]] = moments * (norm.potential[:, 0] * jacobian)[:, None]
    lower = norm.moved(-1.0)
    floor = replace(lower, diffusion=lower.diffusion_floor[:, None])
    load = Load(given, facet, relative * source(np.abs, magnitude))
    size = dual_norm(floor, high, load, response, friedrichs)
    both = u[:, :, None]
    longest, shortest = trial.gram(norm.moved(1.0), both), trial.gram(lower, both)
    long = math.sqrt(longest.matrix[0, 0] + longest.error[0, 0])
    short = shortest.matrix[0, 0] - shortest.error[0, 0]
    # What the errors of coefficients add to k(u, .), and those of facet values.
    size += case.doubt * long + rounded * trace_bound(norm, np.any(case.form.facet, axis=1))
    energy = TrialSpace(Pencil(case.energy, case.energy), order).gram(case.energy.moved(1.0), both)
    total = 2 * case.theta * (energy.matrix[0, 0] + energy.error[0, 0]) + size**2
    return math.sqrt(max(0.0, up(total / short - case.theta**2 * (1 - 1e-15), 8)))


def facet_load(case: InfSup, image: ImageReference, u: Array, order: int) -> tuple[Array, float]:
    """r u on facets, (nf, f) in the facet functions of the flux space of ``order``, and its error in L2."""
    form, mesh = case.form, case.form.mesh
    d = mesh.dimension
    # Facet functions are polynomials of these root mean squares, over the measure of the facet.
    raw = scalar_norms(d - 1, order) * math.sqrt(math.factorial(d - 1))
    result, size = np.zeros((len(mesh.facets), len(raw))), np.zeros((len(mesh.facets), len(raw)))
    measure = case.energy.facet_measure
    owned = mesh.facet_cells[mesh.cell_facets, 0] == np.arange(len(mesh.cells))[:, None]
    for face in range(d + 1):
        tensor = image.facet[: form.facet.shape[1], face]
        factors = form.facet[mesh.cell_facets[:, face]]
        values = np.einsum("cm,mli,ci->cl", factors, tensor, u, optimize=True)
        far = np.einsum("cm,mli,ci->cl", np.abs(factors), magnitude(tensor), np.abs(u), optimize=True)
        own, width = owned[:, face], values.shape[1]
        here = mesh.cell_facets[own, face]
        result[here, :width] = measure[here, None] * values[own] / raw[:width]
        size[here, :width] = far[own]
    size[form.dirichlet] = 0.0
    relative = 4 * ADVECTION_ERROR + gamma(8 * u.shape[1] + 32)
    return result, relative * math.sqrt(math.fsum(measure * np.sum(size**2, axis=1)))


def trace_bound(norm: Form, facets: NDArray[np.bool_]) -> float:
    """A rough C with |v|_L2(facets) <= C |v|, infinite where none is proved."""
    if not np.any(facets & ~norm.dirichlet):
        return 0.0
    stiff = 1e-9 * float(np.mean(np.trace(norm.diffusion[:, 0], axis1=1, axis2=2)))
    return math.sqrt(facet_doubt(norm, np.where(facets & ~norm.dirichlet, stiff, 0.0), 1.0) / stiff)
