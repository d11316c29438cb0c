"""Lower bounds of tau_k by counting: the nonconforming minorant of a pencil.

Crouzeix-Raviart interpolation keeps facet means; element by element it turns A - tB into a matrix N_t whose
negative eigenvalues are at least as many as the negative directions of A - tB. So "N_t has at most k-1 negative eigenvalues"
proves tau_k >= t. The error of interpolation obeys ||e||_T <= kappa ||G^(1/2) grad e||_T with
kappa = c_d max |G^(-1/2) edge|: c_2 = 0.1893 (Liu, Appl. Math. Comput. 267 (2015) 341-355), c_3 = 0.3312 (by the
Poincare inequality of Payne-Weinberger and Bebendorf), c_1 = 1/pi.
"""

from dataclasses import dataclass
from functools import cached_property
from math import factorial

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_matrix, csc_matrix

from service.bounds.inertia import SingularPivot, factorise, smallest_eigenvalue_bound
from service.bounds.krylov import smallest_pairs
from service.bounds.rounding import UNIT, gamma
from service.forms.pencil import Pencil

Array = NDArray[np.float64]

INTERPOLATION = {1: 0.31830988618379070, 2: 0.1893, 3: 0.3312}


@dataclass(frozen=True)
class Minorant:
    """The Crouzeix-Raviart matrices of a pencil."""

    pencil: Pencil

    @cached_property
    def stiffness_of_error(self) -> Array:
        """(nc,) q_T = 1 / kappa_T^2, rounded down."""
        mesh = self.pencil.mesh
        corners = np.concatenate([np.zeros((len(mesh.cells), mesh.dimension, 1)), mesh.spans], axis=2)
        first, second = np.triu_indices(mesh.dimension + 1, 1)
        edges = corners[:, :, second] - corners[:, :, first]
        stretched = np.linalg.solve(self.pencil.diffusion, edges)
        longest = np.max(np.einsum("cai,cai->ci", edges, stretched), axis=1)
        return np.asarray((1 - 1e-12) / (INTERPOLATION[mesh.dimension] ** 2 * longest))

    @cached_property
    def _numbering(self) -> NDArray[np.int64]:
        """(nf,) number of each free facet, -1 on the Dirichlet part."""
        free = ~self.pencil.dirichlet
        return np.where(free, np.cumsum(free) - 1, -1)

    def _assemble(self, local: Array) -> csc_matrix:
        """Sparse matrix from local ones (nc, d+1, d+1)."""
        numbers = self._numbering[self.pencil.mesh.cell_facets]
        rows = np.broadcast_to(numbers[:, :, None], local.shape)
        columns = np.broadcast_to(numbers[:, None, :], local.shape)
        keep = (rows >= 0) & (columns >= 0)
        size = int(np.sum(~self.pencil.dirichlet))
        return csc_matrix(coo_matrix((local[keep], (rows[keep], columns[keep])), shape=(size, size)))

    @cached_property
    def _local_stiffness(self) -> Array:
        d = self.pencil.mesh.dimension
        gradients = np.vstack([-np.ones(d), np.eye(d)])
        return np.asarray(gradients @ self.pencil.gradient_metric @ gradients.T * (d**2 / factorial(d)))

    def _local_mass(self, density: Array) -> Array:
        d = self.pencil.mesh.dimension
        pattern = 1 - 2 * d / (d + 1) + d**2 * (1 + np.eye(d + 1)) / ((d + 1) * (d + 2))
        if d == 2:
            pattern = np.eye(3) / 3  # edge midpoints: exact for quadratics, no rounding off the diagonal
        return np.asarray((density * self.pencil.jacobian / factorial(d))[:, None, None] * pattern)

    def lowered(self, t: float) -> Array:
        """(nc,) the potential p q / (p + q) of N_t with p = potential - t weight; needs p + q > 0."""
        p = self.pencil.potential - t * self.pencil.weight
        return np.asarray(p * self.stiffness_of_error / (p + self.stiffness_of_error))

    @cached_property
    def ceiling(self) -> float:
        """Largest t for which the minorant exists on every cell."""
        return float(np.min((self.pencil.potential + self.stiffness_of_error) / self.pencil.weight))

    def candidates(self, trial: float, wanted: int) -> Array:
        """Unproved lower bounds of tau_1 .. tau_wanted, none above ``trial`` < ceiling, from one linear eigenproblem.

        The potential of N_t is concave in t, so on 0 <= t <= trial it lies above its chord, which is linear.
        """
        at_zero, at_trial = self.lowered(0.0), self.lowered(trial)
        slope = (at_zero - at_trial) / trial
        shift = 0.1 * trial
        matrix = self._assemble(self._local_stiffness + self._local_mass(at_zero + shift * slope))
        mass = self._assemble(self._local_mass(slope))
        solver = factorise_loosely(matrix)
        size = matrix.shape[0]
        block = min(size, wanted + 3)
        start = np.random.default_rng(0).standard_normal((size, block))
        start[:, 0] = 1.0
        if size <= 40:
            dense = np.linalg.eigvalsh(np.linalg.inv(mass.toarray()) @ matrix.toarray())
            values = np.sort(dense)
        else:
            values, _ = smallest_pairs(solver, mass.__matmul__, start, wanted, tolerance=1e-6)
        values = values[:wanted] - shift
        padded = np.full(wanted, trial)
        padded[: len(values)] = np.minimum(values, trial)
        return padded

    def certify(self, t: float, count: int) -> float | None:
        """A number t' <= t, hardly smaller, for which tau_(count+1) >= t' is proved; None if it is not.

        With N_t = L D L^T + E: ||E|| I <= eta (K + sM), where K + sM >= c I is proved by a second factorisation and
        eta = ||E|| / c. Hence (1 + eta) K + M[p_t + eta s] has at most as many negative eigenvalues as D, and
        N_t' dominates it up to a factor for t' with p_t' (1 + eta) >= p_t + eta s.
        """
        if not 0 < t < self.ceiling:
            return None
        local = self._local_stiffness + self._local_mass(self.lowered(t))
        matrix = self._assemble(local)
        assembly = float(np.max(self._assemble(np.abs(local)) @ np.ones(matrix.shape[0])))
        rounding = 4 * gamma(40) * assembly
        try:
            factors = factorise(matrix)
            if factors.negative > count:
                return None
            support = self._assemble(self._local_stiffness + self._local_mass(t * self.pencil.weight))
            floor = smallest_eigenvalue_bound(support) - rounding
        except SingularPivot:
            return None
        if floor <= 0:
            return None
        eta = 1.001 * (factors.residual + rounding) / floor
        slack = 4 * eta * t + 16 * UNIT * t
        while slack < 0.5 * t:
            lowered = self.lowered(t - slack)
            need = self.lowered(t) + eta * t * self.pencil.weight
            if np.all(lowered * (1 + eta) >= need + 16 * UNIT * np.abs(lowered)):
                return t - slack
            slack *= 4
        return None


def factorise_loosely(matrix: csc_matrix):  # type: ignore
    """A solver for repeated use, without any proof attached."""
    import qdldl
    from scipy.sparse import triu

    solver = qdldl.Solver(csc_matrix(triu(matrix)), upper=True)
    return lambda block: np.column_stack([solver.solve(np.ascontiguousarray(column)) for column in block.T])
