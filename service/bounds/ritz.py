"""Conforming trial functions of any order and the upper bounds they give (Rayleigh, Ritz)."""

from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from service.bounds.condensed import Condensed, Numbering
from service.bounds.gram import Gram, gram
from service.bounds.krylov import smallest_pairs
from service.bounds.rounding import gamma
from service.elements.reference import REFERENCE_ERROR, ScalarReference, magnitude, scalar_reference
from service.forms.form import Form, Pencil

Array = NDArray[np.float64]


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
        """Tensors on the unit simplex, for the degree of the coefficients."""
        degree = max(self.pencil.energy.degree, self.pencil.weight.degree)
        return scalar_reference(self.pencil.mesh.dimension, self.order, degree)

    @cached_property
    def numbering(self) -> Numbering:
        """Unknowns: free vertices, then the functions of each free facet, then bubbles (plane meshes)."""
        mesh = self.pencil.mesh
        dirichlet = self.pencil.energy.dirichlet
        held = np.zeros(len(mesh.points), dtype=bool)
        held[mesh.facets[dirichlet]] = True
        vertices = np.where(held, -1, np.cumsum(~held) - 1)
        per_facet = self.order - 1
        start = int(np.sum(~held)) + per_facet * (np.cumsum(~dirichlet) - 1)
        facets = np.where(dirichlet[:, None], -1, start[:, None] + np.arange(per_facet))
        on_facets = facets[mesh.cell_facets].reshape(len(mesh.cells), -1)
        bubbles = len(self.reference.mass[0]) - self.reference.skeleton
        return Numbering(np.concatenate([vertices[mesh.cells], on_facets], axis=1), bubbles)

    @cached_property
    def energy(self) -> Array:
        """Local matrices of A."""
        return self.local(self.pencil.energy)

    @cached_property
    def weight(self) -> Array:
        """Local matrices of B."""
        return self.local(self.pencil.weight)

    def local(self, form: Form, absolute: bool = False) -> Array:
        """Local matrices (nc, n, n) of a form; with ``absolute`` the sum of absolute values of all that enters them."""
        reference = self.reference
        cells, d, n = len(form.mesh.cells), form.mesh.dimension, reference.mass.shape[-1]
        size = np.abs if absolute else np.asarray
        tensor = magnitude if absolute else np.asarray
        metric, potential = size(form.gradient_metric), size(form.potential) * form.jacobian[:, None]
        modes, volume = metric.shape[1], potential.shape[1]
        result = potential @ tensor(reference.mass[:volume]).reshape(volume, -1)
        if np.any(metric):
            result += metric.reshape(cells, -1) @ tensor(reference.stiffness[:modes]).reshape(modes * d * d, -1)
        result = result.reshape(cells, n, n)
        if np.any(form.facet):
            factors = size(form.facet) * form.facet_measure[:, None]
            owned = form.mesh.facet_cells[form.mesh.cell_facets, 0] == np.arange(cells)[:, None]
            for face in range(d + 1):
                traces = tensor(reference.facet_mass[: factors.shape[1], face]).reshape(factors.shape[1], -1)
                chosen = np.where(owned[:, face, None], factors[form.mesh.cell_facets[:, face]], 0.0)
                result += (chosen @ traces).reshape(cells, n, n)
        return np.asarray(result)

    def gram(self, form: Form, functions: Array) -> Gram:
        """Inner products of functions in a form, rounding bounded.

        Gradients do not see constants: taking a vertex value off first keeps the allowance relative to the
        variation
        of a function in a cell instead of its size.
        """
        corners = self.pencil.mesh.dimension + 1
        varying = functions.copy()
        varying[:, :corners] -= functions[:, :1]
        slopes = replace(form, potential=np.zeros((len(functions), 1)), facet=np.zeros((len(form.facet), 1)))
        values = replace(form, diffusion=np.zeros_like(form.diffusion[:, :1]))
        return self._gram(slopes, varying) + self._gram(values, functions)

    def _gram(self, form: Form, functions: Array) -> Gram:
        n, d = functions.shape[1], self.pencil.mesh.dimension
        relative = 4 * REFERENCE_ERROR + gamma(2 * n + 4 * d * d * form.diffusion.shape[1] + 16)
        return gram(functions, self.local(form), self.local(form, absolute=True), relative)

    def extend(self, functions: Array, order: int) -> Array:
        """Coefficients in this space of approximations of functions of a lower ``order`` on the same mesh."""
        cells, corners, columns = len(functions), self.pencil.mesh.dimension + 1, functions.shape[2]
        skeleton = scalar_reference(self.pencil.mesh.dimension, order).skeleton
        result = np.zeros((cells, self.reference.mass.shape[-1], columns))
        result[:, :corners] = functions[:, :corners]
        before = functions[:, corners:skeleton].reshape(cells, corners, -1, columns)
        after = result[:, corners : self.reference.skeleton].reshape(cells, corners, -1, columns)
        after[:, :, : before.shape[2]] = before
        return result

    def smallest(
        self, shift: float, count: int, tolerance: float, start: Array | None = None, rounds: int = 12
    ) -> tuple[Array, Array]:
        """Approximate smallest ratios (b,) and functions (nc, n, b), b >= count if the space is large enough.

        ``shift`` makes A + shift B positive definite; ``start`` are functions of this space to begin with.

        Raises
        ------
        NotPositiveError
            If A + shift B is not positive definite.
        """
        numbering = self.numbering
        system = Condensed.build(self.energy + shift * self.weight, numbering)

        def mass(vector: Array) -> Array:
            return numbering.collect(self.weight @ numbering.spread(vector))

        if start is None:
            begin = np.random.default_rng(0).standard_normal((numbering.size, min(numbering.size, count + 3)))
            corners = numbering.skeleton[:, : self.pencil.mesh.dimension + 1]
            begin[:, 0] = 0.0
            begin[: int(np.max(corners, initial=-1)) + 1, 0] = 1.0
        else:
            begin = numbering.restrict(start)
        values, vectors = smallest_pairs(system.solve, mass, begin, min(count, begin.shape[1]), tolerance, rounds)
        return values - shift, numbering.spread(vectors)
