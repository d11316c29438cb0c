"""Quadratic forms with coefficients constant on each cell, and pairs of them.

One question carries every constant: what are the smallest ratios A[u]/B[u] over a space of functions?
"""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from service.meshing.mesh import Mesh

Array = NDArray[np.float64]

UNIT = 2.0**-53


@dataclass(frozen=True)
class Pencil:
    """A[u] = int G grad u . grad u + p u^2 against B[u] = int b u^2 on functions zero on the Dirichlet part.

    mesh : the cells.
    diffusion : (nc, d, d) symmetric positive definite G per cell.
    potential : (nc,) p per cell.
    weight : (nc,) b > 0 per cell.
    dirichlet : (nf,) bool, facets on which functions vanish.
    """

    mesh: Mesh
    diffusion: Array
    potential: Array
    weight: Array
    dirichlet: NDArray[np.bool_]

    @cached_property
    def jacobian(self) -> Array:
        """(nc,) absolute determinant of the map from the unit simplex."""
        return np.asarray(np.abs(np.linalg.det(self.mesh.spans)))

    @cached_property
    def gradient_metric(self) -> Array:
        """(nc, d, d) M with int_T G grad u . grad v = sum_ab M_ab int d_a u d_b v on the unit simplex."""
        adjugate = np.linalg.inv(self.mesh.spans) * self.jacobian[:, None, None]
        metric = adjugate @ self.diffusion @ adjugate.transpose(0, 2, 1) / self.jacobian[:, None, None]
        return np.asarray((metric + metric.transpose(0, 2, 1)) / 2)

    @cached_property
    def flux_metric(self) -> Array:
        """(nc, d, d) M with int_T G^-1 s . t = sum_ab M_ab int s^a t^b for Piola-mapped fields."""
        spans = self.mesh.spans
        metric = spans.transpose(0, 2, 1) @ np.linalg.solve(self.diffusion, spans)
        metric /= self.jacobian[:, None, None]
        return np.asarray((metric + metric.transpose(0, 2, 1)) / 2)

    @cached_property
    def metric_error(self) -> float:
        """Bound e with (1-e) M <= M' <= (1+e) M for the metrics: M' exact for ``spans`` as given, M as computed.

        Entries of the d x d products and inverses have errors of at most c d u times the products of norms,
        against smallest eigenvalues that are cond(J)^2 below the largest.
        """
        spans = self.mesh.spans
        condition = np.linalg.norm(spans, axis=(1, 2)) * np.linalg.norm(np.linalg.inv(spans), axis=(1, 2))
        return float(32 * self.mesh.dimension**2 * UNIT * np.max(condition) ** 2)

    @cached_property
    def ratio_error(self) -> float:
        """Bound e: every ratio A/B of the true forms is one of these arrays times a factor within 1 - e and 1 + e.

        If the true Jacobian is (I + F) J, gradients change by (I + F)^-T and volumes by det(I + F): A by a factor
        within (1 +- |F|)^d / (1 -+ |F|)^2, B within (1 +- |F|)^d; then the rounding of the metrics.
        """
        dimension = self.mesh.dimension
        return 1.1 * (2 * dimension + 2) * self.mesh.shape_error + 2 * self.metric_error

    def shifted(self, shift: float) -> "Pencil":
        """The pencil (A + shift B, B): every ratio grows by ``shift``."""
        return Pencil(
            self.mesh, self.diffusion, self.potential + shift * self.weight, self.weight, self.dirichlet
        )


def laplace(mesh: Mesh, dirichlet: NDArray[np.bool_]) -> Pencil:
    """int |grad u|^2 against int u^2."""
    count = len(mesh.cells)
    identity = np.broadcast_to(np.eye(mesh.dimension), (count, mesh.dimension, mesh.dimension))
    return Pencil(mesh, identity, np.zeros(count), np.ones(count), dirichlet)
