"""Upper bounds of ratios by another finite element library: scikit-fem, assembled from the definition of a(u, v).

Only the corners of cells come from the service. Which region and which boundary part a place belongs to is found here,
from coordinates.
"""

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray
from random_operators import Case, Part, Piecewise, Ring, Value
from scipy.linalg import eigh
from scipy.sparse import csc_matrix
from scipy.sparse.linalg import ArpackNoConvergence, eigsh
from skfem import Basis, BilinearForm, FacetBasis, MeshTri
from skfem.element import Element, ElementTriP1, ElementTriP2, ElementTriP3

Array = NDArray[np.float64]

QUADRATURE = 12

NEAR = 1e-9
"""Distance at which a point counts as lying on an edge."""


@dataclass(frozen=True)
class Ratio:
    """A ratio A[u]/B[u] of one function, and the sum of the absolute values of the terms of A[u] over B[u]."""

    value: float
    size: float


@dataclass(frozen=True)
class Conforming:
    """Continuous piecewise polynomials on a mesh that vanish on the Dirichlet parts."""

    case: Case
    mesh: MeshTri
    element: Element

    @cached_property
    def _basis(self) -> Basis:
        return Basis(self.mesh, self.element, intorder=QUADRATURE)

    @cached_property
    def _owner(self) -> NDArray[np.int64]:
        """The number of the first region that contains each cell, the number of regions where none does."""
        centres = self.mesh.p[:, self.mesh.t].mean(axis=1)
        owner = np.full(centres.shape[1], len(self.case.regions))
        for number, (x0, y0, x1, y1) in reversed(list(enumerate(self.case.regions.values()))):
            x, y = centres
            owner[(x0 < x) & (x < x1) & (y0 < y) & (y < y1)] = number
        return owner

    def _at(self, piecewise: Piecewise, component: int, places: Array, cells: NDArray[np.int64]) -> Array:
        """A component of a coefficient at places (2, n, q), seen from cells (n,)."""
        regions = [*self.case.regions, None]
        values: dict[str | None, Value] = {name: found[component] for name, found in piecewise.entries}
        result = np.zeros(places.shape[1:])
        for number, name in enumerate(regions):
            own = self._owner[cells] == number
            result[own] = values.get(name, values[None]).at(*places[:, own])
        return result

    def _facets(self, part: Part) -> NDArray[np.int64]:
        """Boundary facets of one part."""
        facets = self.mesh.boundary_facets()
        middles = self.mesh.p[:, self.mesh.facets[:, facets]].mean(axis=1).T
        if part.chain is not None:
            return np.asarray(facets[along(middles, part.chain)])
        taken = np.zeros(len(facets), dtype=bool)
        for other in self.case.parts:
            if other.chain is not None:
                taken |= along(middles, other.chain)
        return np.asarray(facets[~taken])

    def _integral(self, basis: Basis, integrand: Callable[..., Array], cells: NDArray[np.int64]) -> csc_matrix:
        def form(u: object, v: object, w: dict[str, Array]) -> Array:
            return integrand(u, v, w, lambda piecewise, i: self._at(piecewise, i, np.asarray(w["x"]), cells))

        free = self._free
        return csc_matrix(BilinearForm(form).assemble(basis).tocsc()[free][:, free])

    def _inside(self, integrand: Callable[..., Array]) -> csc_matrix:
        return self._integral(self._basis, integrand, np.arange(self.mesh.t.shape[1]))

    def _around(self, part: Part, integrand: Callable[..., Array]) -> csc_matrix:
        basis = FacetBasis(self.mesh, self.element, facets=self._facets(part), intorder=QUADRATURE)
        return self._integral(basis, integrand, basis.tind)

    @cached_property
    def _free(self) -> NDArray[np.int64]:
        held = [self._facets(part) for part in self.case.parts if part.condition == "dirichlet"]
        if not held:
            return np.arange(self._basis.N)
        return np.asarray(self._basis.complement_dofs(self._basis.get_dofs(np.concatenate(held))))

    @cached_property
    def diffusive(self) -> csc_matrix:
        """int K grad u . grad v."""

        def integrand(u, v, w, at):
            k = [at(self.case.diffusion, i) for i in range(4)]
            return (k[0] * u.grad[0] + k[1] * u.grad[1]) * v.grad[0] + (k[2] * u.grad[0] + k[3] * u.grad[1]) * v.grad[1]

        return self._inside(integrand)

    @cached_property
    def terms(self) -> list[csc_matrix]:
        """The terms of a(u, v) one by one."""
        case = self.case
        found = [self.diffusive, self._inside(lambda u, v, w, at: at(case.reaction, 0) * u * v)]
        flow = case.velocity
        if flow is not None and case.form == "convective":
            found.append(
                self._inside(lambda u, v, w, at: (at(flow, 0) * u.grad[0] + at(flow, 1) * u.grad[1]) * v),
            )
        if flow is not None and case.form == "conservative":
            found.append(
                self._inside(lambda u, v, w, at: -u * (at(flow, 0) * v.grad[0] + at(flow, 1) * v.grad[1])),
            )
        for part in case.parts:
            if part.condition == "dirichlet" or not len(self._facets(part)):
                continue
            if part.exchange is not None:
                alpha = part.exchange
                found.append(self._around(part, lambda u, v, w, at, alpha=alpha: at(alpha, 0) * u * v))
            if flow is not None and case.form == "conservative":
                found.append(
                    self._around(part, lambda u, v, w, at: (at(flow, 0) * w["n"][0] + at(flow, 1) * w["n"][1]) * u * v)
                )
        return found

    @cached_property
    def mass(self) -> csc_matrix:
        """int u v."""
        return self._inside(lambda u, v, w, at: u * v)

    @cached_property
    def norm(self) -> csc_matrix:
        """The squared norm."""
        kind = self.case.norm["kind"]
        if kind == "diffusion":
            return symmetric(self.diffusive)
        gradient = self._inside(lambda u, v, w, at: u.grad[0] * v.grad[0] + u.grad[1] * v.grad[1])
        return gradient if kind == "seminorm" else self.case.norm["length_scale"] ** 2 * gradient + self.mass

    @cached_property
    def oscillation(self) -> float:
        """Ratios a(u, u) / ||u||^2 of functions that oscillate around a point: the least at the quadrature points."""
        places = np.asarray(self._basis.global_coordinates())
        cells = np.arange(places.shape[1])
        k = np.stack([self._at(self.case.diffusion, i, places, cells) for i in range(4)], axis=-1)
        matrix = k.reshape(*k.shape[:-1], 2, 2)
        least = float(np.linalg.eigvalsh((matrix + matrix.swapaxes(-1, -2)) / 2).min())
        if self.case.norm["kind"] == "diffusion":
            return 1.0
        return least / float(self.case.norm.get("length_scale", 1.0)) ** 2

    def trace(self, name: str) -> csc_matrix:
        """int u v over one boundary part."""
        part = next(part for part in self.case.parts if part.name == name)
        return self._around(part, lambda u, v, w, at: u * v)

    def pencil(self, constant: str, part: str) -> tuple[list[csc_matrix], csc_matrix]:
        """The terms of A and B for one constant (of one part)."""
        return PENCILS[constant](self, part)


PENCILS: dict[str, Callable[[Conforming, str], tuple[list[csc_matrix], csc_matrix]]] = {
    "coercivity": lambda space, part: (space.terms, space.norm),
    "decay_rate": lambda space, part: (space.terms, space.mass),
    "trace": lambda space, part: ([space.norm], space.trace(part)),
}


def along(points: Array, chain: Ring) -> NDArray[np.bool_]:
    """Which points (n, 2) lie on a chain of segments."""
    found = np.zeros(len(points), dtype=bool)
    for start, end in zip(np.array(chain[:-1]), np.array(chain[1:]), strict=True):
        length = np.hypot(*(end - start))
        forward = (points - start) @ (end - start) / length
        across = ((points - start) @ np.array([end[1] - start[1], start[0] - end[0]])) / length
        found |= (np.abs(across) < NEAR) & (forward > -NEAR) & (forward < length + NEAR)
    return found


def symmetric(matrix: csc_matrix) -> csc_matrix:
    return csc_matrix((matrix + matrix.T) / 2)


def smallest(terms: list[csc_matrix], weight: csc_matrix, definite: bool, guess: Ratio | None) -> Ratio:
    """The smallest ratio that the eigenvalue solver finds, evaluated for its vector: any vector gives an upper bound.

    definite : whether A is positive definite. guess : a ratio above which none has to be looked for.
    """
    terms = [symmetric(term) for term in terms]
    energy, weight = csc_matrix(sum(terms[1:], terms[0])), symmetric(weight)
    count = energy.shape[0]
    if guess is None or count < 60:
        first, second = (weight, energy) if definite else (energy, weight)
        vectors = eigh(first.toarray(), second.toarray())[1][:, [0, -1]]
    elif definite:
        vectors = eigsh(weight, 2, energy, which="LA", v0=start(count))[1]
    else:
        vectors = lowest(energy, weight, guess)
    ratios = [quotient(terms, weight, vector) for vector in vectors.T]
    return min(ratios, key=lambda ratio: ratio.value)


def start(count: int) -> Array:
    return np.random.default_rng(0).standard_normal(count)


def lowest(energy: csc_matrix, weight: csc_matrix, guess: Ratio) -> Array:
    """Vectors of the ratios nearest to a number that lies far below all that were found."""
    near = guess.value
    for _ in range(8):
        far = near - 4 * guess.size
        try:
            values, vectors = eigsh(energy, 2, weight, sigma=far, v0=start(energy.shape[0]), tol=1e-7, maxiter=200)
        except ArpackNoConvergence as error:
            # A dense cluster: any function of it will do.
            return error.eigenvectors if error.eigenvectors.size else start(energy.shape[0])[:, None]
        if values.min() >= far:
            break
        near = float(values.min())
    return np.asarray(vectors)


def quotient(terms: list[csc_matrix], weight: csc_matrix, vector: Array) -> Ratio:
    parts = np.array([vector @ (term @ vector) for term in terms])
    square = float(vector @ (weight @ vector))
    if square <= 0:
        return Ratio(np.inf, np.inf)
    return Ratio(float(parts.sum()) / square, float(np.abs(parts).sum()) / square)


def nested(case: Case, points: Array, cells: NDArray[np.int64]) -> list[Conforming]:
    """Spaces each of which contains the one before, on a mesh given by points (n, 2) and cells (m, 3)."""
    coarse = MeshTri(points.T, cells.T)
    spaces = [Conforming(case, coarse, element()) for element in (ElementTriP1, ElementTriP2, ElementTriP3)]
    return [*spaces, Conforming(case, coarse.refined(), ElementTriP3())]


def references(spaces: list[Conforming], constant: str, part: str) -> list[Ratio]:
    """The smallest ratio found in each space: upper bounds, each better than the one before."""
    found: list[Ratio] = []
    for space in spaces:
        terms, weight = space.pencil(constant, part)
        if terms[0].shape[0]:
            found.append(smallest(terms, weight, constant == "trace", found[-1] if found else None))
    return found
