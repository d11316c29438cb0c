"""The symmetric part of the operator against the definition of a(u, u), integrated as it stands.

Nothing is integrated by parts here: the terms with div b, b . n and the jumps on interfaces, and their signs, must
come out of the bilinear form as the docstring of ``service.problem.operator`` defines it.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
import pytest
from numpy.polynomial.polynomial import polyder, polyval2d
from numpy.typing import NDArray
from skfem.element import ElementTriP1
from skfem.quadrature import get_quadrature

from service.forms.form import Form
from service.forms.modes import coefficient_modes
from service.forms.operator import Discrete
from service.meshing.generate import mesh_domain
from service.meshing.mesh import Mesh
from service.problem.request import Request, read_request

Array = NDArray[np.float64]
Function = Callable[[Array], Array]
Condition = Literal["dirichlet", "neumann", "robin"]
FormName = Literal["convective", "conservative"]

FORMS: tuple[FormName, ...] = ("convective", "conservative")

OUTER = [(3.0, 2.0), (9.0, 2.0), (11.0, 6.0), (6.0, 9.0), (5.0, 6.0), (2.0, 6.0)]
"""Counter-clockwise, one corner turned inward."""

HOLE = [(7.0, 4.0), (6.5, 5.0), (7.5, 5.5), (8.0, 4.5)]
"""Clockwise: the domain is to the left of every edge."""

RINGS = (OUTER, HOLE)

EDGES = [(start, end) for ring in RINGS for start, end in zip(ring, ring[1:] + ring[:1], strict=True)]

BOXES = {"west": (0.0, 0.0, 4.5, 10.0), "band": (1.0, 3.0, 12.0, 4.75), "corner": (8.5, 5.0, 12.0, 7.0)}
"""Regions (x0, y0, x1, y1), in order of precedence; they overlap, and meet the boundary and the hole."""

CENTRE, REACH = (6.0, 5.0), 4.0

DEGREE = 14
"""Of the quadrature; the integrands have at most degree 10."""

ACCURACY = 1e-11
"""Relative to the sum of the absolute values of all terms."""


@dataclass(frozen=True)
class Polynomial:
    """sum over i, j of factors[i, j] X^i Y^j, X and Y the coordinates from the centre, divided by the reach."""

    factors: Array

    @property
    def text(self) -> str:
        """As a problem document has it."""
        powers = np.argwhere(self.factors)
        terms = [
            f"({float(self.factors[i, j])!r})*((x - {CENTRE[0]})/{REACH})^{i}*((y - {CENTRE[1]})/{REACH})^{j}"
            for i, j in powers
        ]
        return " + ".join(terms) or "0"

    def __call__(self, points: Array) -> Array:
        return np.asarray(polyval2d(*((points - CENTRE) / REACH).T, self.factors))

    def slope(self, axis: int) -> "Polynomial":
        """The derivative along x or y."""
        return Polynomial(np.asarray(polyder(self.factors, axis=axis)) / REACH)

    def times_line(self, start: Sequence[float], end: Sequence[float]) -> "Polynomial":
        """Times an affine function that vanishes on a line."""
        across = np.array([end[1] - start[1], start[0] - end[0]])
        offset = float(across @ (np.array(CENTRE) - start)) / REACH
        product = np.pad(offset * self.factors, ((0, 1), (0, 1)))
        product[1:, :-1] += across[0] * self.factors
        product[:-1, 1:] += across[1] * self.factors
        return Polynomial(product / np.abs(product).max())


def polynomial(random: np.random.Generator, degree: int, size: float = 1.0) -> Polynomial:
    factors = size * random.uniform(-1, 1, (degree + 1, degree + 1))
    factors[np.add.outer(np.arange(degree + 1), np.arange(degree + 1)) > degree] = 0.0
    return Polynomial(factors)


def constant(value: float) -> Polynomial:
    return Polynomial(np.array([[value]]))


@dataclass(frozen=True)
class Wave:
    """mean + size sin(along . (x, y))."""

    mean: float
    size: float
    along: tuple[float, float]

    @property
    def text(self) -> str:
        """As a problem document has it."""
        return f"({self.mean!r}) + ({self.size!r})*sin(({self.along[0]!r})*x + ({self.along[1]!r})*y)"

    def __call__(self, points: Array) -> Array:
        return np.asarray(self.mean + self.size * np.sin(points @ self.along))


def wave(random: np.random.Generator, mean: float, size: float) -> Wave:
    first, second = random.uniform(-0.7, 0.7, 2)
    return Wave(mean, size, (float(first), float(second)))


Value = Polynomial | Wave


@dataclass(frozen=True)
class Piece:
    """The coefficients in one region: K row by row, b, c, and alpha of the Robin parts."""

    diffusion: tuple[Value, Value, Value, Value]
    velocity: tuple[Value, Value]
    reaction: Value
    exchange: Value


def piece(random: np.random.Generator) -> Piece:
    """K is not symmetric, but its symmetric part is positive definite."""
    diagonal = [polynomial(random, 2, 0.1) for _ in range(2)]
    for entry in diagonal:
        entry.factors[0, 0] = random.uniform(2, 3)
    return Piece(
        (diagonal[0], polynomial(random, 2, 0.2), polynomial(random, 1, 0.2), diagonal[1]),
        (polynomial(random, 2), polynomial(random, 2)),
        polynomial(random, 2),
        polynomial(random, 2),
    )


def waves(random: np.random.Generator) -> Piece:
    """The same of waves."""
    return Piece(
        (wave(random, 2.0, 0.2), wave(random, 0.1, 0.2), wave(random, -0.2, 0.3), wave(random, 1.0, 0.1)),
        (wave(random, 0.5, 1.0), wave(random, 0.0, 1.0)),
        wave(random, -1.0, 1.0),
        wave(random, 0.5, 1.0),
    )


@dataclass(frozen=True)
class Problem:
    """conditions : of every edge. pieces : by region, ``None`` everywhere else."""

    form: FormName
    conditions: tuple[Condition, ...]
    pieces: dict[str | None, Piece]

    def request(self) -> Request:
        """Read from its document."""

        def by_region(value: Callable[[Piece], Any]) -> list[dict[str, Any]]:
            return [
                {"value": value(piece), **({} if name is None else {"region": name})}
                for name, piece in self.pieces.items()
            ]

        boundary: list[dict[str, Any]] = []
        for number, (edge, condition) in enumerate(zip(EDGES, self.conditions, strict=True)):
            segment = [list(point) for point in edge]
            part: dict[str, Any] = {"name": f"edge {number}", "on": {"segment": segment}, "condition": condition}
            if condition == "robin":
                part["exchange"] = by_region(lambda piece: piece.exchange.text)
            boundary.append(part)
        rings = [[list(point) for point in ring] for ring in RINGS]
        problem = {
            "domain": {
                "shape": {"polygon": {"outer": rings[0], "holes": rings[1:]}},
                "regions": [
                    {"name": name, "shape": {"rectangle": {"corner": [x0, y0], "size": [x1 - x0, y1 - y0]}}}
                    for name, (x0, y0, x1, y1) in BOXES.items()
                ],
            },
            "boundary": boundary,
            "operator": {
                "diffusion": by_region(lambda piece: [[k.text for k in piece.diffusion[i : i + 2]] for i in (0, 2)]),
                "velocity": by_region(lambda piece: [b.text for b in piece.velocity]),
                "reaction": by_region(lambda piece: piece.reaction.text),
                "form": self.form,
            },
        }
        return read_request({"problem": problem}, ("coercivity",))

    def at(self, points: Array, pick: Callable[[Piece], Function]) -> Array:
        """A coefficient at points (n, 2): of the first region that contains them."""
        values = pick(self.pieces[None])(points)
        for name, (x0, y0, x1, y1) in reversed(BOXES.items()):
            if name not in self.pieces:
                continue
            x, y = points.T
            inside = (x0 < x) & (x < x1) & (y0 < y) & (y < y1)
            values = np.where(inside, pick(self.pieces[name])(points), values)
        return values

    def vanishing(self, random: np.random.Generator) -> Polynomial:
        """A random polynomial that vanishes on the Dirichlet edges."""
        found = polynomial(random, 2)
        for edge, condition in zip(EDGES, self.conditions, strict=True):
            if condition == "dirichlet":
                found = found.times_line(*edge)
        return found

    def definition(self, mesh: Mesh, u: Polynomial) -> tuple[float, float]:
        """a(u, u) term by term as it is defined, and the sum of the absolute values of the terms."""
        points, weights = cell_rule(mesh)
        slopes = np.stack([u.slope(0)(points), u.slope(1)(points)])
        k = np.stack([self.at(points, lambda piece, i=i: piece.diffusion[i]) for i in range(4)]).reshape(2, 2, -1)
        b = np.stack([self.at(points, lambda piece, i=i: piece.velocity[i]) for i in range(2)])
        c = self.at(points, lambda piece: piece.reaction)
        sign = 1 if self.form == "convective" else -1
        terms = [
            weights * np.einsum("an,abn,bn->n", slopes, k, slopes),
            weights * sign * np.sum(b * slopes, axis=0) * u(points),
            weights * c * u(points) ** 2,
        ]
        for (start, end), condition in zip(EDGES, self.conditions, strict=True):
            points, weights = edge_rule(mesh, start, end)
            along = np.subtract(end, start) / np.hypot(*np.subtract(end, start))
            normal = (along[1], -along[0])
            if condition == "robin":
                terms.append(weights * self.at(points, lambda piece: piece.exchange) * u(points) ** 2)
            if self.form == "conservative" and condition != "dirichlet":
                outward = sum(self.at(points, lambda piece, i=i: piece.velocity[i]) * normal[i] for i in range(2))
                terms.append(weights * outward * u(points) ** 2)
        return sum(float(term.sum()) for term in terms), sum(float(np.abs(term).sum()) for term in terms)


def user(mesh: Mesh, points: Array) -> Array:
    return np.asarray(np.array(mesh.origin) + mesh.unit * points)


def cell_rule(mesh: Mesh) -> tuple[Array, Array]:
    """Points (n, 2) and weights (n,) on all cells, in the user's coordinates."""
    nodes, weights = get_quadrature(ElementTriP1, DEGREE)
    corners = user(mesh, mesh.points[mesh.cells])
    spans = (corners[:, 1:] - corners[:, :1]).swapaxes(1, 2)
    points = corners[:, :1] + (spans @ nodes).swapaxes(1, 2)
    return points.reshape(-1, 2), (np.abs(np.linalg.det(spans))[:, None] * weights).ravel()


def edge_rule(mesh: Mesh, start: Sequence[float], end: Sequence[float]) -> tuple[Array, Array]:
    """The same for the facets of the mesh on one edge of the outline, found by where they are."""
    ends = user(mesh, mesh.points[mesh.facets])
    across = np.array([end[1] - start[1], start[0] - end[0]])
    along = np.subtract(end, start)
    on_line = np.abs((ends - start) @ across).max(axis=1) < 1e-9
    share = (ends - start) @ along / (along @ along)
    found = ends[on_line & (share > -1e-9).all(axis=1) & (share < 1 + 1e-9).all(axis=1)]
    lengths = np.linalg.norm(found[:, 1] - found[:, 0], axis=1)
    assert abs(lengths.sum() - np.hypot(*along)) < 1e-9
    nodes, weights = np.polynomial.legendre.leggauss(DEGREE // 2 + 1)
    shares = (1 + nodes)[:, None] / 2
    points = found[:, :1] * (1 - shares) + found[:, 1:] * shares
    return points.reshape(-1, 2), (lengths[:, None] * weights / 2).ravel()


def of_form(form: Form, u: Polynomial) -> tuple[float, float]:
    """A form of a function, and how far the true one may be from it by the form's own account."""
    mesh = form.mesh
    nodes, weights = get_quadrature(ElementTriP1, DEGREE)
    points = (mesh.points[mesh.cells[:, 0], :, None] + mesh.spans @ nodes).swapaxes(1, 2)
    places = user(mesh, points).reshape(-1, 2)
    shape = points.shape[:2]
    slopes = mesh.unit * np.stack([u.slope(axis)(places).reshape(shape) for axis in range(2)])
    square = u(places).reshape(shape) ** 2
    matrix = np.einsum("cmab,mn->abcn", form.diffusion, coefficient_modes(2, form.diffusion.shape[1], nodes))
    potential = form.potential @ coefficient_modes(2, form.potential.shape[1], nodes)
    measure = np.abs(np.linalg.det(mesh.spans))[:, None] * weights
    total = np.sum(measure * (np.einsum("acn,abcn,bcn->cn", slopes, matrix, slopes) + potential * square))
    doubt = form.diffusion_error @ np.sum(measure * np.sum(slopes**2, axis=0), axis=1)
    doubt += form.potential_error @ np.sum(measure * square, axis=1)

    nodes, weights = np.polynomial.legendre.leggauss(DEGREE // 2 + 1)
    shares = (1 + nodes) / 2
    first, second = mesh.points[mesh.facets[:, :1]], mesh.points[mesh.facets[:, 1:]]
    points = first * (1 - shares)[:, None] + second * shares[:, None]
    square = u(user(mesh, points).reshape(-1, 2)).reshape(points.shape[:2]) ** 2
    square *= np.linalg.norm(second - first, axis=2) * weights / 2
    facet = form.facet @ coefficient_modes(1, form.facet.shape[1], shares[None])
    total += np.sum(facet * square)
    doubt += form.facet_error @ np.sum(square, axis=1)
    return float(total) * mesh.unit**2, float(doubt) * mesh.unit**2


CONDITIONS: dict[str, tuple[Condition, ...]] = {
    "neumann": ("neumann",) * 10,
    "robin": ("robin",) * 10,
    "one edge held": ("neumann",) * 2 + ("dirichlet",) + ("neumann",) * 7,
    "all three": (
        *("robin", "neumann", "neumann", "robin", "dirichlet", "neumann"),
        *("robin", "neumann", "dirichlet", "robin"),
    ),
}


def check_symmetric_part(problem: Problem, random: np.random.Generator, largest_doubt: float = 1e-8) -> None:
    """The form is the definition, up to rounding and the form's own account of what it neglects."""
    request = problem.request()
    mesh = mesh_domain(request.domain, size=0.4, target=0.5)
    assert mesh.unit != 1.0
    form = Discrete(request, mesh).symmetric_part
    np.testing.assert_array_equal(form.diffusion, form.diffusion.swapaxes(2, 3))
    for _ in range(3):
        u = problem.vanishing(random)
        exact, size = problem.definition(mesh, u)
        found, doubt = of_form(form, u)
        assert abs(found - exact) <= ACCURACY * size + doubt
        assert doubt <= largest_doubt * size


@pytest.mark.parametrize("form", FORMS)
@pytest.mark.parametrize("conditions", CONDITIONS)
def test_piecewise_polynomials(form: FormName, conditions: str) -> None:
    """Every coefficient another quadratic polynomial in every region (definition)."""
    random = np.random.default_rng(len(conditions))
    pieces: dict[str | None, Piece] = {name: piece(random) for name in (*BOXES, None)}
    check_symmetric_part(Problem(form, CONDITIONS[conditions], pieces), random)


@pytest.mark.parametrize("form", FORMS)
def test_the_same_everywhere(form: FormName) -> None:
    """Without interfaces (definition)."""
    random = np.random.default_rng(1)
    check_symmetric_part(Problem(form, CONDITIONS["all three"], {None: piece(random)}), random)


@pytest.mark.parametrize("form", FORMS)
def test_velocity_jumps_alone(form: FormName) -> None:
    """One constant velocity in each region and nothing else that varies: only b . n and jumps (definition)."""
    random = np.random.default_rng(2)
    still = (constant(1.0), constant(0.0), constant(0.0), constant(1.0))
    pieces: dict[str | None, Piece] = {}
    for name in (*BOXES, None):
        velocity = (constant(random.uniform(-9, 9)), constant(random.uniform(-9, 9)))
        pieces[name] = Piece(still, velocity, constant(0.0), constant(0.0))
    check_symmetric_part(Problem(form, CONDITIONS["one edge held"], pieces), random)


@pytest.mark.parametrize("form", FORMS)
def test_waves(form: FormName) -> None:
    """Coefficients that are no polynomials: the form is off by no more than it says, which is little (definition)."""
    random = np.random.default_rng(3)
    pieces: dict[str | None, Piece] = {name: waves(random) for name in (*BOXES, None)}
    check_symmetric_part(Problem(form, CONDITIONS["all three"], pieces), random, 0.05)
