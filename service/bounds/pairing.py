"""A bilinear form on pairs of conforming functions: values with their errors, the largest and the smallest pairs."""

import math
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.sparse.linalg import splu

from service.bounds.condensed import assemble, positive_solver
from service.bounds.krylov import smallest_pairs
from service.bounds.ritz import TrialSpace
from service.bounds.rounding import gamma
from service.elements.advection import ADVECTION_ERROR, image_reference
from service.elements.reference import REFERENCE_ERROR, magnitude, scalar_reference
from service.forms.bilinear import Bilinear
from service.forms.form import constant_form
from service.forms.modes import degree_of

Array = NDArray[np.float64]

SWEEPS = 40
"""Most steps of the power iteration for the largest pair."""


def flow_of(form: Bilinear) -> Array:
    """(nc, m, d) velocity in reference coordinates times the Jacobian: J^-1 b |det J|."""
    mesh = form.mesh
    return np.asarray(np.einsum("cab,cmb->cma", mesh.inverses, form.velocity) * mesh.jacobian[:, None, None])


@dataclass(frozen=True)
class PairingSpace:
    """The values a(u, v) of a form on a space of trial functions."""

    form: Bilinear
    trial: TrialSpace

    def local(self, absolute: bool = False) -> Array:
        """Matrices (nc, n, n) with rows for v and columns for u; ``absolute``: sums of absolute values of all terms."""
        form, d = self.form, self.form.mesh.dimension
        size = np.abs if absolute else np.asarray
        tensor = magnitude if absolute else np.asarray
        volume = max(part.shape[1] for part in (form.diffusion, form.velocity, form.reaction))
        degree = max(degree_of(d, volume), degree_of(d - 1, form.facet.shape[1]))
        reference = scalar_reference(d, self.trial.order, degree)
        image = image_reference(d, self.trial.order, degree)
        inverse, jacobian = form.mesh.inverses[:, None], form.mesh.jacobian
        metric = size(inverse) @ size(form.diffusion) @ size(inverse.swapaxes(2, 3)) * jacobian[:, None, None, None]
        modes, cells = metric.shape[1], len(metric)
        result = np.einsum("cmab,mabij->cij", metric, tensor(reference.stiffness[:modes]), optimize=True)
        reaction = size(form.reaction) * jacobian[:, None]
        result += np.einsum("cm,mij->cij", reaction, tensor(reference.mass[: reaction.shape[1]]))
        if np.any(form.velocity):
            flow = size(flow_of(form))
            low = reference.moments.shape[0]
            slopes = tensor(image.slopes[: flow.shape[1], :, :low])
            drift = np.einsum("cma,mali->cli", flow, slopes, optimize=True)
            result += tensor(reference.moments).T @ drift
        if np.any(form.facet):
            length = self.trial.pencil.energy.facet_measure
            factors = size(form.facet) * length[:, None]
            owned = form.mesh.facet_cells[form.mesh.cell_facets, 0] == np.arange(cells)[:, None]
            for face in range(d + 1):
                chosen = np.where(owned[:, face, None], factors[form.mesh.cell_facets[:, face]], 0.0)
                result += np.einsum("cm,mij->cij", chosen, tensor(reference.facet_mass[: factors.shape[1], face]))
        return np.asarray(result)

    @cached_property
    def matrix(self) -> Array:
        """The local matrices."""
        return self.local()

    def value(self, u: Array, v: Array) -> tuple[float, float]:
        """a(u, v) for functions (nc, n), and a bound of its error: rounding, coefficients, the shapes of the cells."""
        n, d = u.shape[1], self.form.mesh.dimension
        relative = 4 * ADVECTION_ERROR + 4 * REFERENCE_ERROR + gamma(4 * n + 8 * d * d * self.matrix.shape[1] + 32)
        relative += 4 * self.trial.pencil.weight.uncertainty
        total = math.fsum(np.einsum("ci,cij,cj->c", v, self.matrix, u, optimize=True))
        error = math.fsum(np.einsum("ci,cij,cj->c", abs(v), self.local(absolute=True), abs(u), optimize=True))
        return total, 1.01 * relative * error + self.missed(u, v)

    def missed(self, u: Array, v: Array) -> float:
        """A bound of what the errors of the coefficients make of a(u, v), by Cauchy-Schwarz."""
        form, both = self.form, np.stack([u, v], axis=2)

        def squares(diffusion: float | Array, potential: Array, facet: float | Array) -> Array:
            weights = constant_form(form.mesh, form.dirichlet, 0.0, potential, facet)
            weights = replace(weights, diffusion=(diffusion * np.ones(len(potential)))[:, None, None, None] * np.eye(2))
            found = self.trial.gram(weights, both)
            return np.asarray(np.diag(found.matrix) + np.diag(found.error))

        plain = squares(form.diffusion_error, form.reaction_error, np.where(form.dirichlet, 0.0, form.facet_error))
        steep, flat = squares(form.velocity_error, 0 * form.velocity_error, 0.0), squares(0.0, form.velocity_error, 0.0)
        return 1.01 * float(np.sqrt(plain[0] * plain[1]) + np.sqrt(steep[0] * flat[1]))

    def largest(self) -> tuple[Array, Array]:
        """Functions u, v (nc, n) with large a(u, v) / (|u| |v|), by power iteration in the norm."""
        numbering = self.trial.numbering
        gram = positive_solver(assemble(self.trial.weight, numbering.every, numbering.size))
        matrix = assemble(self.matrix, numbering.every, numbering.size)
        v = np.random.default_rng(0).standard_normal(numbering.size)
        u, before = v, 0.0
        for _ in range(SWEEPS):
            u = gram.solve(matrix.T @ v)
            u /= np.sqrt(max(float(u @ (matrix.T @ v)), 1e-300))
            v = gram.solve(matrix @ u)
            size = float(np.sqrt(max(v @ (matrix @ u), 0.0)))
            v /= max(size, 1e-300)
            if abs(size - before) <= 1e-5 * size:
                break
            before = size
        return numbering.spread(u[:, None])[:, :, 0], numbering.spread(v[:, None])[:, :, 0]

    def smallest(self) -> Array:
        """A function u (nc, n) with small sup_v a(u, v) / (|u| |v|), by inverse iteration."""
        numbering = self.trial.numbering
        numbers = numbering.every
        gram = assemble(self.trial.weight, numbers, numbering.size)
        matrix = assemble(self.matrix, numbers, numbering.size)
        # The published types do not know that ``solve`` takes "T" for the transposed system.
        factor: Any
        try:
            factor = splu(matrix)
        except RuntimeError:
            # Singular: moved by a hair, the functions that it sends to zero are still the smallest by far.
            factor = splu(matrix + 1e-10 * (abs(matrix).max() / abs(gram).max()) * gram)

        def inverse(load: Array) -> Array:
            back: Array = factor.solve(np.asarray(load), "T")
            return np.asarray(factor.solve(np.asarray(gram @ back)))

        # The ratios crowd toward those of oscillation: deep spaces tell the first one from the rest.
        start = np.random.default_rng(0).standard_normal((numbering.size, min(3, numbering.size)))
        _, vectors = smallest_pairs(inverse, lambda block: np.asarray(gram @ block), start, 1, 1e-6, rounds=8, depth=10)
        return numbering.spread(vectors[:, :1])[:, :, 0]
