"""Fluxes with prescribed divergence and least energy: the dual half of every sharp bound.

Given functions h_i, find Raviart-Thomas fields s_i with div s_i = h_i and s_i . n = 0 off the Dirichlet part that
minimise
int G^-1 s . s. Inside a cell the divergence fixes the source bubbles at once and the divergence-free bubbles are
eliminated;
between cells, the multiplier of normal continuity solves one sparse symmetric positive definite system
(hybridisation; Arnold and
Brezzi, RAIRO 19 (1985) 7-32). Whatever rounding leaves of the divergence is evaluated afterwards, never assumed
zero.
"""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from service.bounds.condensed import Numbering, assemble, positive_solver
from service.bounds.gram import Gram, gram
from service.bounds.outflow import balance, exact_total
from service.bounds.rounding import gamma
from service.elements.reference import REFERENCE_ERROR, FluxReference, flux_reference, magnitude
from service.forms.form import Form

Array = NDArray[np.float64]

REGULARISATION = 1e-12
"""Relative compressibility that keeps the multiplier system definite without a Dirichlet part."""


@dataclass(frozen=True)
class FluxSpace:
    """Raviart-Thomas fields of one order; a field is stored by its coefficients (nc, n, m) on every cell.

    Coefficients of the two cells at a facet are opposite to the bit, so that normal traces match exactly.
    """

    form: Form
    order: int

    @property
    def reference(self) -> FluxReference:
        """Tensors on the unit simplex."""
        return flux_reference(self.form.mesh.dimension, self.order)

    @cached_property
    def metric(self) -> Array:
        """(nc, d, d) M^-1 with int_T G^-1 s . t = sum_ab (M^-1)_ab int s^a t^b for Piola-mapped fields, M the metric of
        gradients."""
        inverse = np.linalg.inv(self.form.gradient_metric[:, 0])
        return np.asarray((inverse + inverse.swapaxes(1, 2)) / 2)

    @cached_property
    def metric_error(self) -> float:
        """Bound e: the inverse of M as computed is at most (1 + e) times this ``metric`` N.

        L^T N L = I + F for M + E = L L^T: F is evaluated, E bounded by the a priori bound of Cholesky's method.
        """
        factor = np.linalg.cholesky(self.form.gradient_metric[:, 0])
        right, size = factor.swapaxes(1, 2), np.abs(factor)
        d = self.form.mesh.dimension
        defect = np.abs(right @ self.metric @ factor - np.eye(d))
        defect += gamma(4 * d) * (size.swapaxes(1, 2) @ np.abs(self.metric) @ size)
        backward = gamma(2 * d) * np.sum((np.abs(np.linalg.inv(factor)) @ size) ** 2, axis=(1, 2))
        return float(1.2 * np.max(np.linalg.norm(defect, axis=(1, 2)) + 1.1 * backward))

    def local(self, absolute: bool = False) -> Array:
        """Local energies (nc, n, n); with ``absolute`` the sum of absolute values of all that enters them."""
        d, count = self.form.mesh.dimension, self.reference.mass.shape[-1]
        metric = np.abs(self.metric) if absolute else self.metric
        tensor = magnitude(self.reference.mass) if absolute else self.reference.mass
        flat = metric.reshape(-1, d * d) @ tensor.reshape(d * d, -1)
        return np.asarray(flat.reshape(-1, count, count))

    @cached_property
    def energy(self) -> Array:
        """Local energies."""
        return self.local()

    def energy_gram(self, fields: Array) -> Gram:
        """Inner products int G^-1 s_i . s_j."""
        relative = 4 * REFERENCE_ERROR + gamma(2 * fields.shape[1] + 4 * self.form.mesh.dimension**2 + 16)
        return gram(fields, self.energy, self.local(absolute=True), relative)

    def equilibrate(self, sources: Array, outward: Array | None = None) -> Array:
        """Fields (nc, n, m) whose divergences are the given polynomials, up to rounding.

        sources : (nc, q, m) moments of h_i times the Jacobian against the orthonormal polynomials of the unit
        simplex.
        outward : (nf, f, m) what the fields carry out of the cells beside a facet together, by coefficients of the
        facet functions; nothing where None. Of no account on the Dirichlet part.
        """
        mesh, reference = self.form.mesh, self.reference
        cells, columns = len(mesh.cells), sources.shape[2]
        facet, free = reference.facet, reference.free
        per_facet = facet // (mesh.dimension + 1)

        bubbles = np.zeros((cells, reference.mass.shape[-1], columns))
        bubbles[:, facet + free :] = sources[:, 1:]
        used = facet + free
        load = -self.energy[:, :used, used:] @ bubbles[:, used:]
        # Divergence-free bubbles out of the way.
        inner = np.linalg.inv(self.energy[:, facet:used, facet:used])
        coupling = inner @ self.energy[:, facet:used, :facet]
        schur = self.energy[:, :facet, :facet] - self.energy[:, :facet, facet:used] @ coupling
        reduced = load[:, :facet] - coupling.transpose(0, 2, 1) @ load[:, facet:]
        # Facet coefficients with the right outflow: f = S^-1 (load - multiplier - c y), c . f = total.
        outflow = reference.divergence[0, :facet]
        inverse = np.linalg.inv(schur)
        spread = inverse @ outflow
        stiffness = np.einsum("i,ci->c", outflow, spread)
        if not np.any(self.form.dirichlet):
            stiffness += REGULARISATION * np.mean(stiffness) * self.form.jacobian / np.mean(self.form.jacobian)
        mobility = inverse - spread[:, :, None] * spread[:, None, :] / stiffness[:, None, None]
        particular = mobility @ reduced + (spread / stiffness[:, None])[:, :, None] * sources[:, None, 0]

        free_facets = ~self.form.dirichlet
        start = per_facet * (np.cumsum(free_facets) - 1)
        per = np.where(free_facets[:, None], start[:, None] + np.arange(per_facet), -1)
        numbering = Numbering(per[mesh.cell_facets].reshape(cells, -1), 0)
        factor = positive_solver(assemble(mobility, numbering.skeleton, numbering.shared))
        outflows = particular
        wanted = np.zeros((len(mesh.facets), per_facet, columns)) if outward is None else outward
        held = self.form.dirichlet
        demand = np.where(held[:, None, None], 0.0, wanted)[~held].reshape(-1, columns)
        # The second pass refines the first: in the smallest cells the last digits of the outflow count.
        for _ in range(2):
            multiplier = factor.solve(numbering.gather.T @ outflows.reshape(-1, columns) - demand)
            outflows = outflows - mobility @ (numbering.gather @ multiplier).reshape(cells, facet, columns)
        outflows = self._conforming(outflows, sources[:, 0] / self.reference.divergence[0, 0], wanted)
        remainder = inner @ load[:, facet:] - coupling @ outflows
        return np.concatenate([outflows, remainder, sources[:, 1:]], axis=1)

    def _conforming(self, outflows: Array, totals: Array, wanted: Array) -> Array:
        """Facet coefficients that add up on both sides to those ``wanted``, out of each cell to ``totals`` (nc, m)."""
        mesh = self.form.mesh
        cells, _, columns = outflows.shape
        faces = mesh.dimension + 1
        shaped = outflows.reshape(cells, faces, -1, columns)
        first = mesh.facet_cells[mesh.cell_facets, 0] == np.arange(cells)[:, None]
        sign = np.where(first, 1.0, -1.0)[:, :, None, None]
        total = np.zeros((len(mesh.facets), shaped.shape[2], columns))
        np.add.at(total, mesh.cell_facets, sign * shaped)
        boundary, held = mesh.facet_cells[:, 1] < 0, self.form.dirichlet
        # Both sides get half of what is wanted, and the mean of what they pass on to one another.
        given = np.where(held[:, None, None], 0.0, np.where(boundary, 1.0, 0.5)[:, None, None] * wanted)
        passed = total * np.where(boundary, np.where(held, 1.0, 0.0), 0.5)[:, None, None]
        own = np.sum(given[mesh.cell_facets, 0], axis=1)
        passed[:, 0] = balance(mesh, held, passed[:, 0], totals - own)
        return np.asarray((sign * passed[mesh.cell_facets] + given[mesh.cell_facets]).reshape(outflows.shape))

    def divergence_moments(self, fields: Array) -> tuple[Array, Array]:
        """Moments (nc, q, m) of the divergence times the Jacobian, and a bound of the error of each.

        Row 0 is the flow out of a cell, whose sum is formed without loss.
        """
        divergence, facet = self.reference.divergence, self.reference.facet
        relative = 2 * REFERENCE_ERROR + gamma(2 * divergence.shape[1])
        error = relative * (magnitude(divergence) @ np.abs(fields))
        moments = divergence @ fields
        flow, lost = exact_total(fields[:, : facet : facet // (self.form.mesh.dimension + 1)])
        moments[:, 0] = divergence[0, 0] * flow
        error[:, 0] = 1.01 * divergence[0, 0] * lost + gamma(2) * np.abs(moments[:, 0])
        return moments, error
