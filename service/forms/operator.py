"""The forms of a problem on a mesh, in the user's units: symmetric part of the operator, and the norm.

Mesh coordinates are x = (user - origin) / unit. Dividing every form by unit^d leaves G / unit^2, p, and r / unit,
so that ratios of forms come out in the user's units; unit is a power of two, the division exact.

Symmetric part of a (integrate b . grad u u by parts on every cell):
convective form: p = c - div b / 2, r = alpha + b . n / 2, and + [b . n] / 2 where the normal velocity jumps;
conservative form: p = c + div b / 2, r = alpha + b . n / 2 where the diffusive flux is prescribed, - [b . n] / 2,
with [b . n] = b1 . n1 + b2 . n2 of both sides' outward normals.
"""

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property
from operator import itemgetter
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from service.bounds.rounding import UNIT
from service.forms.coefficients import Approximation, approximate, user_points, widened
from service.forms.form import Form, constant_form
from service.forms.modes import coefficient_modes
from service.meshing.mesh import Mesh
from service.problem.expressions.expression import Expression
from service.problem.operator import Field, Norm, Operator, Samples
from service.problem.piecewise import Piecewise
from service.problem.request import Request

Array = NDArray[np.float64]
T = TypeVar("T")

DEGREE = 2
"""Degree of the polynomials that stand for coefficients that are not constant."""


@dataclass(frozen=True)
class Discrete:
    """A problem's coefficients on a mesh."""

    request: Request
    mesh: Mesh

    @property
    def operator(self) -> Operator:
        """The operator of the problem."""
        return self.request.operator

    @cached_property
    def dirichlet(self) -> NDArray[np.bool_]:
        """(nf,) facets on which functions vanish."""
        held = [i for i, part in enumerate(self.request.domain.parts) if part.condition == "dirichlet"]
        return np.isin(self.mesh.part, held)

    @cached_property
    def _corners(self) -> tuple[Array, Array]:
        """First vertices and spans of all cells in user coordinates."""
        start = user_points(self.mesh, self.mesh.points[self.mesh.cells[:, 0]])
        return start, self.mesh.spans * self.mesh.unit

    def entries(self, piecewise: Piecewise[T]) -> tuple[NDArray[np.int64], tuple[T, ...]]:
        """Which entry of a piecewise value holds on each cell, and the values."""
        names = [region.name for region in self.request.domain.regions]
        return piecewise.indices(names, self.mesh.regions), piecewise.values

    def on_cells(self, piecewise: Piecewise[T], pick: Callable[[T], Expression]) -> Approximation:
        """One component of a piecewise value on all cells."""
        chosen, values = self.entries(piecewise)
        start, spans = self._corners
        parts = [(chosen == number, pick(value)) for number, value in enumerate(values)]
        return gathered(
            len(chosen),
            [(cells, approximate(e, start[cells], spans[cells], DEGREE)) for cells, e in parts if cells.any()],
        )

    def on_facets(
        self, piecewise: Piecewise[T], pick: Callable[[T], Expression], side: int, facets: NDArray[np.int64]
    ) -> Approximation:
        """One component on some facets, seen from the first or second cell beside them."""
        chosen, values = self.entries(piecewise)
        ends = user_points(self.mesh, self.mesh.points[self.mesh.facets[facets]])
        start, spans = ends[:, 0], (ends[:, 1:] - ends[:, :1]).swapaxes(1, 2)
        owner = chosen[self.mesh.facet_cells[facets, side]]
        parts = [(owner == number, pick(value)) for number, value in enumerate(values)]
        return gathered(
            len(owner), [(own, approximate(e, start[own], spans[own], DEGREE)) for own, e in parts if own.any()]
        )

    @cached_property
    def tensor(self) -> tuple[Array, Array]:
        """K by modes (nc, m, 2, 2), not symmetric in general, and a bound of the error in the 2-norm."""
        entries = [self.on_cells(self.operator.diffusion, itemgetter(i)) for i in range(4)]
        width = max(part.modes.shape[1] for part in entries)
        matrix = np.stack([widened(part.modes, width) for part in entries], axis=2).reshape(-1, width, 2, 2)
        k11, k12, k21, k22 = (part.error for part in entries)
        return matrix, np.maximum(k11, k22) + np.maximum(k12, k21)

    @cached_property
    def diffusion(self) -> tuple[Array, Array]:
        """sym K by modes (nc, m, 2, 2) and a bound of the error in the 2-norm."""
        matrix, error = self.tensor
        matrix = (matrix + matrix.swapaxes(2, 3)) / 2
        return matrix, error + 4 * UNIT * np.abs(matrix).sum(axis=(1, 2, 3))

    @cached_property
    def normals(self) -> Array:
        """(nf, 2) unit normals out of the first cell beside each facet."""
        mesh = self.mesh
        gradients = np.linalg.inv(mesh.spans)
        gradients = np.concatenate([-gradients.sum(axis=1, keepdims=True), gradients], axis=1)
        normals = np.zeros((len(mesh.facets), 2))
        for vertex in range(mesh.dimension + 1):
            facet = mesh.cell_facets[:, vertex]
            first = mesh.facet_cells[facet, 0] == np.arange(len(facet))
            outward = -gradients[first, vertex]
            normals[facet[first]] = outward / np.linalg.norm(outward, axis=1, keepdims=True)
        return normals

    def velocity(self) -> list[Approximation]:
        """The components of b on all cells; no list without a velocity."""
        velocity = self.operator.velocity
        if isinstance(velocity, Field):
            return [self.on_cells(velocity.components, itemgetter(axis)) for axis in range(2)]
        return [linear(self.mesh.nodal[self.mesh.cells, axis]) for axis in range(2)] if velocity is not None else []

    def divergence(self) -> Approximation | None:
        """div b on all cells; None where it vanishes."""
        velocity = self.operator.velocity
        if isinstance(velocity, Samples):
            values = self.mesh.nodal[self.mesh.cells]
            slopes = values[:, 1:] - values[:, :1]
            inverse = np.linalg.inv(self._corners[1])
            total = np.einsum("cia,cia->c", slopes, inverse)
            # Values at midpoints are rounded means.
            size = np.abs(values).max(axis=1)
            return Approximation(total[:, None], 8 * UNIT * np.einsum("ca,cia->c", size, np.abs(inverse)))
        if not isinstance(velocity, Field) or velocity.solenoidal:
            return None
        first = self.on_cells(velocity.components, lambda v: v[0].derivative("x"))
        return first + self.on_cells(velocity.components, lambda v: v[1].derivative("y"))

    def normal_velocity(self, facets: NDArray[np.int64], side: int) -> Approximation:
        """b . n on some facets, b from one side, n out of the first cell."""
        velocity, normal = self.operator.velocity, self.normals[facets]
        if isinstance(velocity, Field):
            parts = [self.on_facets(velocity.components, itemgetter(axis), side, facets) for axis in range(2)]
        else:
            parts = [linear(self.mesh.nodal[self.mesh.facets[facets], axis]) for axis in range(2)]
        return parts[0].times(normal[:, 0]) + parts[1].times(normal[:, 1])

    def facet_terms(self, flow: float, jump: float) -> Approximation:
        """alpha + ``flow`` b . n on the boundary off the Dirichlet part, ``jump`` [b . n] on interfaces, else 0."""
        mesh, operator = self.mesh, self.operator
        terms: list[tuple[NDArray[np.int64], Approximation]] = []
        for number, part in enumerate(self.request.domain.parts):
            facets = np.flatnonzero(mesh.part == number)
            if part.condition == "dirichlet" or not len(facets):
                continue
            if part.exchange is not None:
                terms.append((facets, self.on_facets(part.exchange, lambda e: e, 0, facets)))
            if operator.velocity is not None and flow:
                terms.append((facets, self.normal_velocity(facets, 0).times(flow)))
        if isinstance(operator.velocity, Field) and len(operator.velocity.components.entries) > 1 and jump:
            chosen, _ = self.entries(operator.velocity.components)
            inner = np.flatnonzero(mesh.facet_cells[:, 1] >= 0)
            sides = chosen[mesh.facet_cells[inner]]
            jumping = inner[sides[:, 0] != sides[:, 1]]
            if len(jumping):
                difference = self.normal_velocity(jumping, 0) + self.normal_velocity(jumping, 1).times(-1.0)
                terms.append((jumping, difference.times(jump)))
        width = max((term.modes.shape[1] for _, term in terms), default=1)
        modes, error = np.zeros((len(mesh.facets), width)), np.zeros(len(mesh.facets))
        for facets, term in terms:
            modes[facets] += widened(term.modes, width)
            error[facets] += term.error + 4 * UNIT * np.abs(modes[facets]).sum(axis=1)
        return Approximation(modes, error)

    def potential(self, divergence: float) -> Approximation:
        """c + ``divergence`` div b."""
        total = self.on_cells(self.operator.reaction, lambda c: c)
        found = self.divergence() if divergence else None
        return total if found is None else total + found.times(divergence)

    @property
    def conserved(self) -> float:
        """Factor of div b, and minus that of [b . n], in the form itself: 1 where it is conservative."""
        return 1.0 if self.operator.form == "conservative" else 0.0

    @property
    def skew_share(self) -> float:
        """The same factor in the symmetric part."""
        return self.conserved - 0.5

    @cached_property
    def symmetric_part(self) -> Form:
        """a(u, u)."""
        unit = self.mesh.unit
        matrix, error = self.diffusion
        potential = self.potential(self.skew_share)
        facets = self.facet_terms(0.5, -self.skew_share).times(1 / unit)
        return Form(
            self.mesh,
            self.dirichlet,
            matrix / unit**2,
            potential.modes,
            facets.modes,
            error / unit**2,
            potential.error,
            facets.error,
        )

    @cached_property
    def norm(self) -> Form:
        """|u|_V^2."""
        return norm_form(self.request.norm, self)

    @cached_property
    def mass(self) -> Form:
        """int u^2."""
        return constant_form(self.mesh, self.dirichlet, potential=1.0)

    @cached_property
    def weighted_gradient(self) -> Form:
        """int sym K grad u . grad u."""
        matrix, error = self.diffusion
        none, bare = np.zeros(len(error)), np.zeros(len(self.mesh.facets))
        unit = self.mesh.unit
        return Form(
            self.mesh, self.dirichlet, matrix / unit**2, none[:, None], bare[:, None], error / unit**2, none, bare
        )

    @cached_property
    def gradient(self) -> Form:
        """int |grad u|^2."""
        return constant_form(self.mesh, self.dirichlet, diffusion=1 / self.mesh.unit**2)

    def boundary_mass(self, number: int) -> Form:
        """int u^2 over one boundary part."""
        density = np.where(self.mesh.part == number, 1 / self.mesh.unit, 0.0)
        return constant_form(self.mesh, self.dirichlet, facet=density)


def norm_form(norm: Norm, discrete: Discrete) -> Form:
    """The squared norm as a form."""
    mesh = discrete.mesh
    if norm.kind == "diffusion":
        return discrete.weighted_gradient
    if norm.kind == "seminorm":
        return discrete.gradient
    length = norm.length_scale / mesh.unit
    return constant_form(mesh, discrete.dirichlet, diffusion=length * length, potential=1.0)


def linear(values: Array) -> Approximation:
    """Linear functions on simplices from their values (n, k + 1) at the vertices."""
    k = values.shape[1] - 1
    corners = np.hstack([np.zeros((k, 1)), np.eye(k)])
    modes = values @ np.linalg.inv(coefficient_modes(k, k + 1, corners))
    return Approximation(np.asarray(modes), 32 * UNIT * np.abs(values).max(axis=1))


def gathered(count: int, parts: list[tuple[NDArray[np.bool_], Approximation]]) -> Approximation:
    """One approximation from those on disjoint sets of simplices."""
    width = max((part.modes.shape[1] for _, part in parts), default=1)
    modes, error = np.zeros((count, width)), np.zeros(count)
    for where, part in parts:
        modes[where], error[where] = widened(part.modes, width), part.error
    return Approximation(modes, error)
