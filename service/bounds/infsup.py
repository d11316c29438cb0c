"""Inf-sup: how small sup_v a(u, v) / |v| can be against |u|, proved from below by counting.

Where the gradient's weight in the norm is G = K / theta, a(u, v) = theta (u, v)_V + k(u, v) with k of lower order. With
(Cu, v)_V = k(u, v),

    |Au|^2 = theta^2 |u|^2 + 2 theta k(u, u) + |Cu|^2 = 2 theta a(u, u) - theta^2 |u|^2 + |Cu|^2,

and |Cu|^2 >= g . M^-1 g for g_i = k(u, phi_i), phi_i any conforming functions and M their Gram matrix. g depends on the
cell and facet moments of u alone, exactly, where the coefficients are polynomials: integrate by parts on each cell. So
with a minorant N of 2 theta a(u, u) - (theta^2 + t) |u|^2 in those moments, |Au|^2 >= t |u|^2 for all u in V if

    [[N, g^T], [g, -M]]   has no more negative eigenvalues than there are functions phi_i.
"""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csc_matrix

from service.bounds.condensed import Numbering, assemble
from service.bounds.inertia import SingularPivotError, factorise, negatives, smallest_eigenvalue_bound
from service.bounds.minorant import Minorant, TooCoarseError, eliminate_cells
from service.bounds.pairing import flow_of
from service.bounds.proof import LARGEST_RESERVE, Prover
from service.bounds.ritz import TrialSpace
from service.bounds.rounding import gamma
from service.elements.advection import ADVECTION_ERROR, PairingReference, pairing_reference
from service.elements.moments import moment_reference
from service.elements.reference import REFERENCE_ERROR, magnitude
from service.forms.bilinear import Bilinear
from service.forms.form import Form, Pencil
from service.forms.modes import degree_of

Array = NDArray[np.float64]

CONFORMING = 3
"""Order of the functions phi_i."""


@dataclass(frozen=True)
class InfSup:
    """The certificate |Au|^2 >= t |u|^2 on one mesh.

    energy : a(u, u).
    norm : |u|^2, with K = theta G.
    form : a itself.
    doubt : bound of what the errors of its coefficients add to |a(u, v)| / (|u| |v|).
    """

    energy: Form
    norm: Form
    form: Bilinear
    theta: float
    doubt: float

    @cached_property
    def degree(self) -> int:
        """Degree of the coefficients of k."""
        d = self.form.mesh.dimension
        volume = max(self.form.velocity.shape[1], self.form.reaction.shape[1], self.norm.potential.shape[1])
        return max(degree_of(d, volume), degree_of(d - 1, self.form.facet.shape[1]))

    @property
    def order(self) -> int:
        """Order of the facet moments: those that phi_i times coefficients ask for."""
        return CONFORMING + self.degree

    @cached_property
    def pencil(self) -> Pencil:
        """(2 theta a - theta^2 |.|^2, |.|^2), less what errors of coefficients take of |Cu|^2.

        |Cu| >= |C'u| - doubt |u| gives |Cu|^2 >= (1 - h) |C'u|^2 - (1/h - 1) doubt^2 |u|^2, here h = doubt / theta.
        """
        lost = self.theta**2 + self.doubt * self.theta
        return Pencil(self.energy.times(2 * self.theta).plus(self.norm, -lost), self.norm)

    @cached_property
    def trial(self) -> TrialSpace:
        """The functions phi_i."""
        return TrialSpace(Pencil(self.norm, self.norm), CONFORMING)

    @property
    def reference(self) -> PairingReference:
        """Tensors on the unit simplex."""
        return pairing_reference(self.form.mesh.dimension, CONFORMING, self.order, self.degree)

    def coupling(self, absolute: bool = False) -> Array:
        """g on each cell (nc, n, facet and cell moments); ``absolute``: the sum of absolute values of all terms."""
        form, mesh = self.form, self.form.mesh
        size = np.abs if absolute else np.asarray
        tensor = magnitude if absolute else np.asarray
        reference, d, cells = self.reference, mesh.dimension, len(mesh.cells)
        flow = size(flow_of(form))
        modes = flow.shape[1]
        normals = size(moment_reference(d, self.order, self.degree).normals)
        weight = form.reaction.copy()
        weight[:, 0] -= self.theta * self.norm.potential[:, 0]
        weight = size(weight) * self.energy.jacobian[:, None]
        inside = np.einsum("cma,mail->cil", flow, tensor(reference.cell[:modes]), optimize=True)
        inside += np.einsum("cm,mil->cil", weight, tensor(reference.values[: weight.shape[1]]), optimize=True)
        through = np.einsum("cma,fa->cmf", flow, normals)
        outside = np.einsum("cmf,mfil->cifl", through, tensor(reference.trace[:modes]), optimize=True)
        if np.any(form.facet):
            factors = size(form.facet) * self.energy.facet_measure[:, None]
            owned = mesh.facet_cells[mesh.cell_facets, 0] == np.arange(cells)[:, None]
            chosen = np.where(owned[:, :, None], factors[mesh.cell_facets], 0.0)
            outside += np.einsum("cfm,mfil->cifl", chosen, tensor(reference.facet[: factors.shape[1]]), optimize=True)
        return np.concatenate([outside.reshape(cells, outside.shape[1], -1), inside], axis=2)

    @cached_property
    def _parts(self) -> tuple[Array, Array, Array, Array]:
        """g and M on each cell with bounds of their errors, phi_i scaled to have about unit length."""
        raised = self.norm.moved(1.0)
        gram, far = self.trial.local(raised), self.trial.local(raised, absolute=True)
        numbering = self.trial.numbering
        diagonal = np.zeros(numbering.size)
        keep = numbering.every >= 0
        np.add.at(diagonal, numbering.every[keep], np.einsum("cii->ci", gram)[keep])
        scale = np.where(keep, 2.0 ** -np.round(0.5 * np.log2(np.where(keep, diagonal[numbering.every], 1.0))), 0.0)
        coupling, reach = self.coupling(), self.coupling(absolute=True)
        loose = 4 * ADVECTION_ERROR + gamma(8 * self.reference.cell.shape[0] * self.form.mesh.dimension + 40)
        tight = 4 * REFERENCE_ERROR + gamma(16 * raised.diffusion.shape[1] + 32)
        both = scale[:, :, None] * scale[:, None, :]
        return coupling * scale[:, :, None], loose * reach * scale[:, :, None], gram * both, tight * far * both

    def bordered(self, form: Form, enlarged: float, bounded: bool) -> tuple[csc_matrix, float] | None:
        """[[N, g^T], [g, -(1 + enlarged) M / (1 - h)]] without the cell moments, and a bound of its error."""
        minorant = Minorant(form, self.order)
        local, wrong = minorant.local(bounded)
        coupling, coupling_error, gram, gram_error = self._parts
        facets = minorant.numbering.skeleton.shape[1]
        n, total = coupling.shape[1], local.shape[1]
        factor = (1 + enlarged) / (1 - self.doubt / self.theta)
        # Facet moments, then the phi_i, then cell moments.
        place = np.r_[0:facets, facets + n : total + n]
        everything, errors = np.zeros((len(local), total + n, total + n)), np.zeros((len(local), total + n, total + n))
        everything[:, place[:, None], place], errors[:, place[:, None], place] = local, wrong
        own = np.arange(facets, facets + n)
        everything[:, own[:, None], place], errors[:, own[:, None], place] = coupling, coupling_error
        everything[:, place[:, None], own] = coupling.swapaxes(1, 2)
        errors[:, place[:, None], own] = coupling_error.swapaxes(1, 2)
        everything[:, own[:, None], own], errors[:, own[:, None], own] = -factor * gram, factor * gram_error
        return eliminate_cells(everything, errors, self._numbering(minorant), bounded)

    def _numbering(self, minorant: Minorant) -> Numbering:
        """Facet moments first, the phi_i behind them."""
        outer, own = minorant.numbering, self.trial.numbering
        behind = np.where(own.every >= 0, own.every + outer.shared, -1)
        return Numbering(np.concatenate([outer.skeleton, behind], axis=1), outer.bubbles)

    def seems(self, t: float) -> bool:
        """Whether the count says |Au|^2 >= t |u|^2, unproved."""
        form = self.pencil.at(t)
        if form.uncertainty > LARGEST_RESERVE:
            return False
        try:
            found = self.bordered(form.moved(-1.0), 0.0, bounded=False)
            return found is not None and negatives(found[0]) <= self.trial.numbering.size
        except (TooCoarseError, SingularPivotError):
            return False

    def proves(self, t: float) -> bool:
        """Whether |Au|^2 >= t |u|^2 for all u in V is proved.

        As in ``proof.Prover``: with N of Q - h P and (1 + e) M instead, the matrix is smaller by at least h N[P] on
        facets and e M on the phi_i, which pays for its error.
        """
        form = self.pencil.at(t)
        if form.uncertainty > LARGEST_RESERVE or not self.doubt < 0.5 * self.theta:
            return False
        form = form.moved(-1.0)
        reserves = Prover(self.pencil, self.order, t)
        (ground, allowance), below = reserves.ground, self.gram_bound
        if ground <= 0 or below <= 0:
            return False
        taken = 2 * allowance
        try:
            for _ in range(2):
                reserve, enlarged = 1.5 * taken / ground, 1.5 * taken / below
                if reserve > LARGEST_RESERVE or enlarged > LARGEST_RESERVE:
                    return False
                found = self.bordered(form.plus(reserves.positive, -reserve), enlarged, bounded=True)
                if found is None:
                    return False
                factors = factorise(found[0])
                if factors.negative > self.trial.numbering.size:
                    return False
                need = factors.residual + found[1]
                if need <= 0.99 * min(reserve * ground, enlarged * below):
                    return True
                taken = need
        except (TooCoarseError, SingularPivotError):
            return False
        return False

    @cached_property
    def gram_bound(self) -> float:
        """A proved lower bound of the smallest eigenvalue of M, 0 where there is none."""
        _, _, gram, error = self._parts
        numbering = self.trial.numbering
        meeting = int(np.max(np.bincount(numbering.every[numbering.every >= 0].ravel()), initial=1))
        allowance = meeting * float(np.max(np.linalg.norm(error + gamma(meeting + 2) * np.abs(gram), axis=(1, 2))))
        return max(0.0, smallest_eigenvalue_bound(assemble(gram, numbering.every, numbering.size)) - allowance)
