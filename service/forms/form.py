"""Quadratic forms whose coefficients are polynomials on each cell, and pairs of them.

One question carries every constant: what are the smallest ratios A[u]/B[u] over a space of functions?
"""

from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from service.bounds.rounding import UNIT, gamma
from service.elements.scalar import subsimplices
from service.forms.modes import control_points, degree_of, suprema
from service.meshing.mesh import Mesh

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Form:
    """Q[u] = int G grad u . grad u + int p u^2 + sum_F int_F r u^2 on functions that vanish on the Dirichlet part.

    Coefficients are given by modes: factors of the orthogonal polynomials of the unit simplex (of the facet for r),
    scaled
    so that mode 0 is the constant 1 and its factor the mean.

    dirichlet : (nf,) bool, facets on which functions vanish.
    diffusion : (nc, m, d, d) symmetric matrices G.
    potential : (nc, m) p.
    facet : (nf, mf) r, on inner facets too.
    diffusion_error, potential_error, facet_error : (nc,), (nc,), (nf,) bounds of the distance of the true coefficients
        from these polynomials, in the 2-norm for G.
    """

    mesh: Mesh
    dirichlet: NDArray[np.bool_]
    diffusion: Array
    potential: Array
    facet: Array
    diffusion_error: Array
    potential_error: Array
    facet_error: Array

    @cached_property
    def degree(self) -> int:
        """Degree of the coefficients as polynomials."""
        d = self.mesh.dimension
        volume = degree_of(d, max(self.diffusion.shape[1], self.potential.shape[1]))
        return max(volume, degree_of(d - 1, self.facet.shape[1]) if d > 1 else 0)

    @property
    def jacobian(self) -> Array:
        """(nc,) absolute determinant of the map from the unit simplex."""
        return self.mesh.jacobian

    @cached_property
    def gradient_metric(self) -> Array:
        """(nc, m, d, d): int_T G grad u . grad v = sum over modes and directions of int psi_m d_a u d_b v."""
        inverse = self.mesh.inverses[:, None]
        metric = inverse @ self.diffusion @ inverse.swapaxes(2, 3) * self.jacobian[:, None, None, None]
        return np.asarray((metric + metric.swapaxes(2, 3)) / 2)

    @cached_property
    def facet_measure(self) -> Array:
        """(nf,) length (area) of each facet."""
        mesh = self.mesh
        corners = np.concatenate([np.zeros((len(mesh.cells), mesh.dimension, 1)), mesh.spans], axis=2)
        measure = np.zeros(len(mesh.facets))
        factorial = float(np.prod(np.arange(1, mesh.dimension)))
        for opposite, vertices in enumerate(subsimplices(mesh.dimension, mesh.dimension)):
            sides = corners[:, :, vertices[1:]] - corners[:, :, vertices[:1]]
            gram = np.linalg.det(sides.swapaxes(1, 2) @ sides)
            measure[mesh.cell_facets[:, opposite]] = np.sqrt(np.abs(gram)) / factorial
        return measure

    @cached_property
    def diffusion_floor(self) -> Array:
        """(nc, d, d) constant matrices with G >= floor on the cell.

        A share of the mean, the largest for which all control points are above it; where that is not positive definite,
        the mean less all other modes.
        """
        d, modes = self.mesh.dimension, self.diffusion.shape[1]
        mean = self.diffusion[:, 0]
        if modes == 1:
            return np.asarray(mean)
        loss = np.linalg.norm(self.diffusion[:, 1:], axis=(2, 3)) @ suprema(d, modes)[1:]
        crude = mean - loss[:, None, None] * np.eye(d)
        least = np.linalg.eigvalsh(mean)[:, 0]
        good = least > 1e-9 * np.abs(np.trace(mean, axis1=1, axis2=2))
        root = np.linalg.inv(np.linalg.cholesky(np.where(good[:, None, None], mean, np.eye(d))))
        points = np.einsum("cm,nmab->ncab", control_points(d, modes), self.diffusion)
        ratio = np.linalg.eigvalsh(root[:, None] @ points @ root[:, None].swapaxes(2, 3))
        share = np.min(ratio[:, :, 0], axis=1) - 1e-11 * np.max(np.abs(ratio), axis=(1, 2))
        return np.asarray(np.where((good & (share > 0))[:, None, None], share[:, None, None] * mean, crude))

    @cached_property
    def potential_swing(self) -> Array:
        """(nc,) bound of |p - mean| on the cell."""
        return np.abs(self.potential[:, 1:]) @ suprema(self.mesh.dimension, self.potential.shape[1])[1:]

    @cached_property
    def facet_swing(self) -> Array:
        """(nf,) bound of |r - mean| on the facet."""
        return np.abs(self.facet[:, 1:]) @ suprema(self.mesh.dimension - 1, self.facet.shape[1])[1:]

    @cached_property
    def anisotropy(self) -> float:
        """Largest ratio of the eigenvalues of G on a cell; infinite where G is not positive definite."""
        if not np.any(self.diffusion):
            return 1.0
        least = np.linalg.eigvalsh(self.diffusion_floor)[:, 0]
        mean = np.linalg.eigvalsh(self.diffusion[:, 0])
        most = mean[:, -1] + np.maximum(mean[:, 0] - least, 0.0)
        return float(np.max(most / least)) if np.all(least > 0) else np.inf

    @cached_property
    def metric_error(self) -> float:
        """Bound e with (1-e) M <= M' <= (1+e) M for the metrics: M' exact for ``spans`` as given, M as computed;
        also for volumes and facets. Infinite where G is not safely positive definite.

        With X the computed inverse of J and R = J X - I, X G X^T = J^-1 (I + R) G (I + R)^T J^-T: what R changes is
        measured in the metric of G, the rounding of the products in that of M, all with absolute values entry by entry.
        """
        d, spans = self.mesh.dimension, self.mesh.spans
        inverse = self.mesh.inverses
        reach = np.abs(inverse) @ np.abs(spans)
        error = 32 * d**2 * UNIT * np.sum(reach**2, axis=(1, 2))
        if np.any(self.diffusion):
            size = np.einsum("cmab,m->cab", np.abs(self.diffusion), suprema(d, self.diffusion.shape[1]))
            floor = self.diffusion_floor
            least = np.linalg.eigvalsh(floor)[:, 0]
            metric = inverse @ floor @ inverse.swapaxes(1, 2)
            values = np.linalg.eigvalsh((metric + metric.swapaxes(1, 2)) / 2)
            if not (np.all(least > 0) and np.all(values[:, 0] > 1e-12 * values[:, -1])):
                return np.inf
            rounding = np.abs(inverse) @ size @ np.abs(inverse).swapaxes(1, 2)
            error += gamma(8 * d) * np.linalg.norm(rounding, axis=(1, 2)) / values[:, 0]
            missed = np.abs(spans @ inverse - np.eye(d)) + gamma(2 * d) * np.abs(spans) @ np.abs(inverse)
            once = missed @ size
            changed = once + once.swapaxes(1, 2) + once @ missed.swapaxes(1, 2)
            half = np.abs(np.linalg.inv(np.linalg.cholesky(floor)))
            error += np.linalg.norm(half @ changed @ half.swapaxes(1, 2), axis=(1, 2))
        return float(1.1 * np.max(error))

    @cached_property
    def uncertainty(self) -> float:
        """Bound e: each part of the true form (gradients, potential on a cell, a facet) is that of these arrays times a
        factor within 1 - e and 1 + e.

        If the true Jacobian is (I + F) J, gradients change by (I + F)^-T, in the metric of G by at most
        cond(G)^(1/2) |F|; volumes by det(I + F), facets in between. Then the rounding of metrics and sums of forms.
        """
        stretched = self.mesh.dimension + 2 * np.sqrt(self.anisotropy)
        return float(1.1 * stretched * self.mesh.shape_error + self.metric_error)

    def moved(self, sign: float) -> "Form":
        """A form below (sign -1) or above (sign +1) every true form that these arrays may stand for."""
        e, d = self.uncertainty, self.mesh.dimension
        potential, facet, diffusion = self.potential.copy(), self.facet.copy(), self.diffusion.copy()
        potential[:, 0] += sign * (e * (np.abs(potential[:, 0]) + self.potential_swing) + 1.001 * self.potential_error)
        facet[:, 0] += sign * (e * (np.abs(facet[:, 0]) + self.facet_swing) + 1.001 * self.facet_error)
        size = np.linalg.norm(diffusion, axis=(2, 3)) @ suprema(d, diffusion.shape[1])
        diffusion[:, 0] += sign * (e * size + 1.001 * self.diffusion_error)[:, None, None] * np.eye(d)
        none, bare = np.zeros(len(potential)), np.zeros(len(facet))
        return Form(self.mesh, self.dirichlet, diffusion, potential, facet, none, none, bare)

    @property
    def steady(self) -> bool:
        """Whether coefficients are constant on each cell and there are no facet terms."""
        return self.diffusion.shape[1] == self.potential.shape[1] == 1 and not np.any(self.facet)

    def times(self, factor: float) -> "Form":
        """``factor`` times this form."""
        return replace(
            self,
            diffusion=factor * self.diffusion,
            potential=factor * self.potential,
            facet=factor * self.facet,
            diffusion_error=abs(factor) * self.diffusion_error,
            potential_error=abs(factor) * self.potential_error,
            facet_error=abs(factor) * self.facet_error,
        )

    def plus(self, other: "Form", factor: float) -> "Form":
        """This form plus ``factor`` times another on the same mesh."""
        return replace(
            self,
            diffusion=combined(self.diffusion, other.diffusion, factor),
            potential=combined(self.potential, other.potential, factor),
            facet=combined(self.facet, other.facet, factor),
            diffusion_error=self.diffusion_error + abs(factor) * other.diffusion_error,
            potential_error=self.potential_error + abs(factor) * other.potential_error,
            facet_error=self.facet_error + abs(factor) * other.facet_error,
        )


@dataclass(frozen=True)
class Pencil:
    """Two forms A and B on the same mesh and space, B >= 0; the ratios are those of A[u]/B[u]."""

    energy: Form
    weight: Form

    @property
    def mesh(self) -> Mesh:
        """The cells."""
        return self.energy.mesh

    def at(self, t: float) -> Form:
        """A - t B."""
        return self.energy.plus(self.weight, -t)

    def shifted(self, shift: float) -> "Pencil":
        """(A + shift B, B): every ratio grows by ``shift``."""
        return Pencil(self.energy.plus(self.weight, shift), self.weight)

    @cached_property
    def ratio_error(self) -> float:
        """Bound e: where all parts of A are >= 0, a true ratio is one of these arrays times a factor within 1 +- e.

        For coefficients constant on each cell and B a mass; infinite where A has a part that is not positive.
        """
        energy, weight = self.energy, self.weight
        least = np.linalg.eigvalsh(energy.diffusion[:, 0])[:, 0]
        parts = [energy.diffusion_error / least, weight.potential_error / weight.potential[:, 0]]
        if np.any(energy.potential_error):
            parts.append(energy.potential_error / energy.potential[:, 0])
        worst = max(float(np.max(part)) for part in parts)
        fair = all(np.all(part >= 0) for part in parts)
        return 2.1 * energy.uncertainty + 2.1 * worst if fair else np.inf


def combined(first: Array, second: Array, factor: float) -> Array:
    """Sum of mode arrays of different lengths."""
    modes = max(first.shape[1], second.shape[1])
    result = np.zeros((len(first), modes, *first.shape[2:]))
    result[:, : first.shape[1]] += first
    result[:, : second.shape[1]] += factor * second
    return result


def constant_form(
    mesh: Mesh,
    dirichlet: NDArray[np.bool_],
    diffusion: float | Array = 0.0,
    potential: float | Array = 0.0,
    facet: float | Array = 0.0,
) -> Form:
    """A form with constants on cells and facets: scalars, one matrix, or arrays (nc, d, d), (nc,), (nf,)."""
    cells, d = len(mesh.cells), mesh.dimension
    matrix = np.asarray(diffusion, dtype=float)
    if matrix.ndim < 3:
        matrix = np.broadcast_to(matrix * np.eye(d) if matrix.ndim == 0 else matrix, (cells, d, d))
    volume = np.broadcast_to(np.asarray(potential, dtype=float), (cells,))
    surface = np.broadcast_to(np.asarray(facet, dtype=float), (len(mesh.facets),))
    none, bare = np.zeros(cells), np.zeros(len(mesh.facets))
    return Form(mesh, dirichlet, matrix[:, None], volume[:, None], surface[:, None], none, none, bare)


def laplace(mesh: Mesh, dirichlet: NDArray[np.bool_]) -> Pencil:
    """int |grad u|^2 against int u^2."""
    return Pencil(constant_form(mesh, dirichlet, diffusion=1.0), constant_form(mesh, dirichlet, potential=1.0))
