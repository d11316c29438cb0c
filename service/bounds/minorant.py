"""Lower bounds of tau_k by counting: a nonconforming minorant of a pencil, of any order.

For u in V keep, on each cell, its L2 projection u_T on polynomials of order k + 1 and, on each facet, that of its trace u_F of
order k. They determine l(w) = int G grad u . grad w for every polynomial w of order k + 1, hence for any R of that order,
with e = u - R (equal means on the cell),

    int G grad u . grad u = 2 l(R) - int G grad R . grad R + int G grad e . grad e,
    int G grad e . grad e >= a (|u_T - R|^2 + |u - u_T|^2) / c^2 + (1 - a) w sum_F mean_F (u_F - P_F R)^2.

c is the Poincare constant of the cell in the metric of G: h / j_(1,1) on triangles (Laugesen and Siudeja, J. Differential Equations
249 (2010) 118-135), h / pi on any simplex (Payne and Weinberger 1960; Bebendorf 2003), h the longest edge. w comes from the
trace identity: mean_F f^2 = mean_T (f^2 + (2/d) f (x - P) . grad f) <= (c^2 + 2 h c / d) mean_T |grad f|^2.
While a / c^2 >= t b - p on every cell the term |u - u_T|^2 can be dropped, and A[u] - t B[u] >= N_t[u_T, u_F], a form on
finitely many unknowns. If N_t has at most k-1 negative eigenvalues then neither does A - tB on V, so tau_k >= t.
(With k = 0 this is a relative of Crouzeix and Raviart's element; the idea of keeping moments in cells and on facets is that of hybrid high-order
methods, Di Pietro and Ern, Comput. Methods Appl. Mech. Engrg. 283 (2015) 1-21.)
"""

from dataclasses import dataclass
from functools import cached_property
from math import factorial, pi

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csc_matrix

from service.bounds.condensed import Condensed, Numbering, assemble
from service.bounds.inertia import SingularPivot, factorise, smallest_eigenvalue_bound
from service.bounds.krylov import smallest_pairs
from service.bounds.rounding import UNIT, gamma
from service.elements.hybrid import HYBRID_ERROR, HybridReference, hybrid_reference
from service.forms.pencil import Pencil

Array = NDArray[np.float64]

POINCARE = {1: pi, 2: 3.8317059702075123, 3: pi}
"""h / POINCARE[d] bounds the Poincare constant of a simplex with longest edge h; rounded down where used."""

SHARE = 0.5
"""The least share a of the error's energy that is spent on the cell terms."""


@dataclass(frozen=True)
class Minorant:
    """N_t of one order for t up to ``trial``: K - t M, linear in t.

    Raises
    ------
    ValueError
        If ``trial`` is not below ``ceiling(pencil)``.
    """

    pencil: Pencil
    order: int
    trial: float

    def __post_init__(self) -> None:
        if self.trial >= ceiling(self.pencil):
            raise ValueError("trial value above what the cells allow")

    @property
    def reference(self) -> HybridReference:
        """Tensors on the unit simplex."""
        return hybrid_reference(self.pencil.mesh.dimension, self.order)

    @cached_property
    def numbering(self) -> Numbering:
        """Facet polynomials of free facets are shared, cell polynomials a cell's own."""
        mesh = self.pencil.mesh
        free = ~self.pencil.dirichlet
        per_facet = self.reference.trace.shape[1]
        start = per_facet * (np.cumsum(free) - 1)
        numbers = np.where(free[:, None], start[:, None] + np.arange(per_facet), -1)
        return Numbering(
            numbers[mesh.cell_facets].reshape(len(mesh.cells), -1), self.reference.stiffness.shape[-1]
        )

    @cached_property
    def _mass(self) -> Array:
        """(nc,) M on each cell is this number times the identity on the cell polynomials."""
        return self.pencil.weight * self.pencil.jacobian

    @cached_property
    def _local(self) -> tuple[Array, Array]:
        """K on each cell (nc, n, n), facet unknowns first, and a bound (nc,) of the 2-norm of its error."""
        pencil, reference = self.pencil, self.reference
        d = pencil.mesh.dimension
        cells, q = len(pencil.mesh.cells), reference.stiffness.shape[-1]
        metric = pencil.gradient_metric
        stiffness = (metric.reshape(cells, d * d) @ reference.stiffness.reshape(d * d, -1)).reshape(
            cells, q, q
        )
        normal = reference.normals @ metric  # (nc, d+1, d)
        flux = np.einsum("cfa,fajl->cfjl", normal, reference.slopes).reshape(cells, -1, q)
        trace = reference.trace.reshape(-1, q)
        # R = u_T + Z d with d = u_F - P u_T; any Z is allowed, this one is optimal up to rounding.
        lift = np.zeros((cells, q, trace.shape[0]))
        lift[:, 1:] = np.linalg.solve(stiffness[:, 1:, 1:], flux.transpose(0, 2, 1)[:, 1:])

        poincare = poincare_constants(pencil)
        longest = poincare * POINCARE[d]
        need = (self.trial * pencil.weight - pencil.potential) * poincare**2
        share = np.maximum(SHARE, need * (1 + 1e-12))
        inside = share * pencil.jacobian / poincare**2
        measure = pencil.jacobian / factorial(d)
        on_facets = (1 - share) * measure / ((d + 1) * (poincare**2 + 2 * longest * poincare / d))

        across = lift.transpose(0, 2, 1)
        both = flux @ lift
        missed = np.eye(trace.shape[0]) - trace @ lift
        jumps = both + both.transpose(0, 2, 1) - across @ stiffness @ lift
        jumps += inside[:, None, None] * (across @ lift)
        jumps += on_facets[:, None, None] * (missed.transpose(0, 2, 1) @ missed)

        coupling = flux - jumps @ trace
        own = stiffness - trace.T @ flux - flux.transpose(0, 2, 1) @ trace + trace.T @ jumps @ trace
        own += (pencil.potential * pencil.jacobian)[:, None, None] * np.eye(q)
        local = np.concatenate(
            [
                np.concatenate([jumps, coupling], axis=2),
                np.concatenate([coupling.transpose(0, 2, 1), own], axis=2),
            ],
            axis=1,
        )
        # Errors of the factors (tensors, sums over directions), then of the products, all in the Frobenius norm.
        relative = 2 * HYBRID_ERROR + gamma(8 * q)
        size, norm = norms(metric), float(np.linalg.norm(trace))
        wrong_flux = relative * size * np.linalg.norm(reference.normals) * np.linalg.norm(reference.slopes)
        wrong_stiffness = relative * size * np.linalg.norm(np.trace(reference.stiffness))
        reach = norms(lift)
        wrong_jumps = reach * (2 * wrong_flux + reach * wrong_stiffness) + relative * (
            2 * reach * norms(flux) + reach**2 * (norms(stiffness) + inside) + on_facets * (norm * reach + d + q) ** 2
        )
        wrong = wrong_jumps + relative * norms(jumps)
        wrong_own = wrong_stiffness + norm * (2 * wrong_flux + 2 * relative * norms(flux) + norm * wrong)
        error = wrong + wrong_flux + norm * wrong + wrong_own
        error += relative * np.abs(pencil.potential) * pencil.jacobian * q
        return (local + local.transpose(0, 2, 1)) / 2, 1.1 * error

    def _with_mass(self, factor: float) -> Array:
        """K + factor M on each cell."""
        local = self._local[0].copy()
        facets = self.numbering.skeleton.shape[1]
        diagonal = np.arange(facets, local.shape[1])
        local[:, diagonal, diagonal] += factor * self._mass[:, None]
        return local

    def candidates(self, wanted: int) -> Array:
        """Unproved lower bounds of tau_1 .. tau_wanted, none above ``trial``: the eigenvalues of K against M."""
        shift = 0.1 * self.trial
        numbering = self.numbering
        system = Condensed.build(self._with_mass(shift), numbering)
        shared, cells = numbering.shared, len(self._mass)
        weights = np.repeat(self._mass, numbering.bubbles)[:, None]

        def inverse(inside: Array) -> Array:
            return system.solve(np.vstack([np.zeros((shared, inside.shape[1])), inside]))[shared:]

        start = np.random.default_rng(0).standard_normal((cells * numbering.bubbles, wanted + 3))
        start[:, 0] = 0.0
        start[:: numbering.bubbles, 0] = 1.0
        block = start[:, : min(start.shape)]
        count = min(wanted, block.shape[1])
        values, _ = smallest_pairs(inverse, lambda v: weights * v, block, count, 1e-5, rounds=4)
        padded = np.full(wanted, self.trial)
        found = min(wanted, len(values))
        padded[:found] = np.minimum(values[:found] - shift, self.trial)
        return padded

    def _condensed(self, factor: float) -> tuple[csc_matrix, float] | None:
        """Facet matrix of K + factor M with the cell unknowns eliminated, and a bound of its error.

        None where a cell's own block is not safely positive definite. For any W, with r = B - A W, the Schur
        complement is C - B^T W - W^T B + W^T A W - r^T A^-1 r: no error of the inverse enters unnoticed.
        """
        local = self._with_mass(factor)
        error = self._local[1] + 4 * UNIT * abs(factor) * self._mass
        facets = self.numbering.skeleton.shape[1]
        outer, mixed, inner = local[:, :facets, :facets], local[:, facets:, :facets], local[:, facets:, facets:]
        least = np.linalg.eigvalsh(inner)[:, 0] - error - gamma(100 * inner.shape[1]) * norms(inner)
        if not np.all(least > 0):
            return None
        weights = np.linalg.solve(inner, mixed)
        residual = mixed - inner @ weights
        back = mixed.transpose(0, 2, 1) @ weights
        schur = outer - back - back.transpose(0, 2, 1) + weights.transpose(0, 2, 1) @ inner @ weights
        far = norms(weights)
        rounding = gamma(8 * local.shape[1])
        total = error * (1 + far) ** 2
        total += rounding * (norms(outer) + 2 * norms(mixed) * far + norms(inner) * far**2)
        missed = norms(residual) + error * (1 + far) + rounding * (norms(mixed) + norms(inner) * far)
        total += missed**2 / least
        # Every facet belongs to two cells at most; the sum of two numbers rounds once more.
        allowance = 2 * float(np.max(total)) + 2 * gamma(4) * float(np.max(norms(schur)))
        return assemble(schur, self.numbering.skeleton, self.numbering.shared), allowance

    def count(self, t: float) -> int:
        """Negative eigenvalues of N_t as computed, without proof; a large number where it cannot be told."""
        condensed = self._condensed(-t)
        if condensed is None:
            return self.numbering.size
        try:
            return factorise(condensed[0]).negative
        except SingularPivot:
            return self.numbering.size

    def certify(self, t: float, count: int) -> float | None:
        """A number t' <= t, hardly smaller, for which tau_(count+1) >= t' is proved; None if it is not.

        With the facet matrix of N_t factorised up to E: |E| I <= eta (K + tM), where the facet matrix of K + tM is
        proved to be >= c I and eta = |E| / c. So (1 + eta) K - (1 - eta) t M has at most as many negative eigenvalues as D,
        and t' = t (1 - eta) / (1 + eta).
        """
        if not 0 < t <= self.trial:
            return None
        below, above = self._condensed(-t), self._condensed(t)
        if below is None or above is None:
            return None
        try:
            factors = factorise(below[0])
            if factors.negative > count:
                return None
            floor = smallest_eigenvalue_bound(above[0]) - above[1]
        except SingularPivot:
            return None
        if floor <= 0:
            return None
        eta = 1.001 * (factors.residual + below[1]) / floor
        return t * (1 - eta) / (1 + eta) * (1 - 8 * UNIT) if eta < 1 else None


def norms(matrices: Array) -> Array:
    """(nc,) Frobenius norms."""
    return np.asarray(np.linalg.norm(matrices, axis=(1, 2)))


def poincare_constants(pencil: Pencil) -> Array:
    """(nc,) c with |f| <= c |G^(1/2) grad f| for functions of zero mean on a cell, rounded up."""
    mesh = pencil.mesh
    corners = np.concatenate([np.zeros((len(mesh.cells), mesh.dimension, 1)), mesh.spans], axis=2)
    first, second = np.triu_indices(mesh.dimension + 1, 1)
    edges = corners[:, :, second] - corners[:, :, first]
    stretched = np.linalg.solve(pencil.diffusion, edges)
    longest = np.max(np.einsum("cai,cai->ci", edges, stretched), axis=1)
    return np.asarray(np.sqrt(longest) / POINCARE[mesh.dimension] * (1 + 1e-12))


def ceiling(pencil: Pencil) -> float:
    """The t up to which a minorant exists on these cells."""
    return float(np.min((1 / poincare_constants(pencil) ** 2 + pencil.potential) / pencil.weight)) * (1 - 1e-9)
