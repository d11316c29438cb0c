"""Conforming trial functions of any order and the upper bounds they give (Rayleigh, Ritz)."""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from service.bounds.condensed import Condensed, Numbering
from service.bounds.krylov import smallest_pairs
from service.bounds.rounding import exact_sum, gamma
from service.elements.reference import REFERENCE_ERROR, ScalarReference, scalar_reference
from service.forms.pencil import Pencil

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Gram:
    """A matrix of inner products computed in floating point.

    matrix : (m, m).
    size : (m,) numbers with |error_ij| <= sqrt(size_i size_j); hence the error is at most m diag(size) as a form.
    """

    matrix: Array
    size: Array

    def __add__(self, other: "Gram") -> "Gram":
        return Gram(self.matrix + other.matrix, 1.0001 * (self.size + other.size))


def gram(left: Array, right: Array, weights: Array, operations: int) -> Gram:
    """Inner products of functions given cell by cell, with the allowance for rounding.

    Parameters
    ----------
    left : (nc, n, m) coefficients of the functions.
    right : (nc, n, m) coefficients multiplied by the local matrices.
    weights : (nc, n) bounds of the diagonal of the exact local matrices.
    operations : roundings behind an entry of ``right`` and the final product.
    """
    matrix = exact_sum(left.transpose(0, 2, 1) @ right)
    sums = np.einsum("cn,cnm->cm", np.sqrt(weights), np.abs(left))
    relative = 1.01 * (REFERENCE_ERROR + gamma(operations))
    return Gram((matrix + matrix.T) / 2, 1.01 * relative * exact_sum(sums**2))


@dataclass(frozen=True)
class TrialSpace:
    """Continuous piecewise polynomials of one order that vanish on the Dirichlet part.

    Functions are stored by their coefficients on every cell, (nc, n, m); shared coefficients are equal to the bit,
    so that the functions are continuous exactly.
    """

    pencil: Pencil
    order: int

    @property
    def reference(self) -> ScalarReference:
        """Tensors on the unit simplex."""
        return scalar_reference(self.pencil.mesh.dimension, self.order)

    @cached_property
    def numbering(self) -> Numbering:
        """Unknowns: free vertices, then the functions of each free facet, then bubbles (plane meshes)."""
        mesh = self.pencil.mesh
        held = np.zeros(len(mesh.points), dtype=bool)
        held[mesh.facets[self.pencil.dirichlet]] = True
        vertices = np.where(held, -1, np.cumsum(~held) - 1)
        free = ~self.pencil.dirichlet
        per_facet = self.order - 1
        start = int(np.sum(~held)) + per_facet * (np.cumsum(free) - 1)
        facets = np.where(free[:, None], start[:, None] + np.arange(per_facet), -1)
        on_facets = facets[mesh.cell_facets].reshape(len(mesh.cells), -1)
        bubbles = len(self.reference.mass) - self.reference.skeleton
        return Numbering(np.concatenate([vertices[mesh.cells], on_facets], axis=1), bubbles)

    def apply_gradient(self, functions: Array) -> Array:
        """Local stiffness matrices times coefficients."""
        d = self.pencil.mesh.dimension
        metric = self.pencil.gradient_metric
        tensor = self.reference.stiffness
        result = np.zeros_like(functions)
        for a in range(d):
            for b in range(d):
                result += metric[:, a, b, None, None] * (tensor[a, b] @ functions)
        return result

    def apply_mass(self, functions: Array, density: Array) -> Array:
        """Local mass matrices with a density (nc,) times coefficients."""
        return np.asarray((density * self.pencil.jacobian)[:, None, None] * (self.reference.mass @ functions))

    def mass_gram(self, functions: Array, density: Array) -> Gram:
        """Inner products int density u_i u_j, density >= 0."""
        diagonal = np.diag(self.reference.mass)
        weights = 1.01 * (density * self.pencil.jacobian)[:, None] * diagonal
        count = len(diagonal)
        return gram(functions, self.apply_mass(functions, density), weights, 2 * count + 8)

    def gradient_gram(self, functions: Array) -> Gram:
        """Inner products int G grad u_i . grad u_j."""
        size = np.linalg.norm(self.pencil.gradient_metric, axis=(1, 2))
        diagonal = np.diag(np.trace(self.reference.stiffness))
        weights = 1.01 * size[:, None] * diagonal
        d = self.pencil.mesh.dimension
        return gram(functions, self.apply_gradient(functions), weights, 2 * len(diagonal) + 2 * d**2 + 8)

    def system(self, shift: float) -> Condensed:
        """The factorised operator of A + shift B."""
        d = self.pencil.mesh.dimension
        tensor = self.reference.stiffness.reshape(d * d, -1)
        count = len(self.reference.mass)
        local = (self.pencil.gradient_metric.reshape(-1, d * d) @ tensor).reshape(-1, count, count)
        density = (self.pencil.potential + shift * self.pencil.weight) * self.pencil.jacobian
        local += density[:, None, None] * self.reference.mass
        return Condensed.build(local, self.numbering)

    def extend(self, functions: Array, order: int) -> Array:
        """Coefficients in this space of approximations of functions of a lower ``order`` on the same mesh."""
        lower = scalar_reference(self.pencil.mesh.dimension, order)
        cells, corners, columns = len(functions), self.pencil.mesh.dimension + 1, functions.shape[2]
        result = np.zeros((cells, len(self.reference.mass), columns))
        result[:, :corners] = functions[:, :corners]
        before = functions[:, corners : lower.skeleton].reshape(cells, corners, -1, columns)
        after = result[:, corners : self.reference.skeleton].reshape(cells, corners, -1, columns)
        after[:, :, : before.shape[2]] = before
        return result

    def smallest(
        self, shift: float, count: int, tolerance: float, start: Array | None = None, rounds: int = 12
    ) -> tuple[Array, Array]:
        """Approximate smallest ratios (b,) and functions (nc, n, b), b >= count if the space is large enough.

        ``shift`` makes A + shift B positive definite; ``start`` are functions of this space to begin with.
        """
        numbering, system = self.numbering, self.system(shift)

        def mass(vector: Array) -> Array:
            return numbering.collect(self.apply_mass(numbering.spread(vector), self.pencil.weight))

        if start is None:
            begin = np.random.default_rng(0).standard_normal((numbering.size, min(numbering.size, count + 3)))
            corners = numbering.skeleton[:, : self.pencil.mesh.dimension + 1]
            begin[:, 0] = 0.0
            begin[: int(np.max(corners, initial=-1)) + 1, 0] = 1.0
        else:
            begin = numbering.restrict(start)
        values, vectors = smallest_pairs(system.solve, mass, begin, min(count, begin.shape[1]), tolerance, rounds)
        return values - shift, numbering.spread(vectors)
