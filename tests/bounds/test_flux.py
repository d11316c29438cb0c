"""Equilibrated fields: divergence, normal traces, least energy, and the identity of Prager and Synge."""

import numpy as np
import pytest
from numpy.typing import NDArray
from small_meshes import everywhere, nowhere, random_square

from service.bounds.flux import FluxSpace
from service.elements import raviart_thomas, reference
from service.elements.jet import simplex_dimension
from service.elements.quadrature import simplex_rule
from service.elements.reference import raw_orthonormal, scalar_norms
from service.forms.form import constant_form
from service.meshing.generate import mesh_domain
from service.meshing.mesh import Mesh
from service.problem.domain import BoundaryPart, PlaneDomain

Array = NDArray[np.float64]

POINTS, WEIGHTS = simplex_rule(2, 14)


def places(mesh: Mesh) -> Array:
    """(nc, 2, q) quadrature points of every cell."""
    return np.asarray(mesh.points[mesh.cells[:, 0]][:, :, None] + mesh.spans @ POINTS)


def space(mesh: Mesh, held: NDArray[np.bool_], order: int) -> FluxSpace:
    return FluxSpace(constant_form(mesh, held, diffusion=1.0), order)


def moments(flux: FluxSpace, values: Array) -> Array:
    """(nc, q, 1) moments of a function given at quadrature points, times the Jacobian."""
    psi = raw_orthonormal(2, flux.order, POINTS, scalar_norms(2, flux.order))[:, 0]
    return np.asarray(flux.form.jacobian[:, None, None] * np.einsum("lq,cq->cl", psi * WEIGHTS, values)[:, :, None])


def values(flux: FluxSpace, fields: Array) -> Array:
    """(nc, 2, q) the field at quadrature points (Piola transform)."""
    raw, _ = raviart_thomas.basis(2, flux.order, POINTS)
    mass, divergence = reference.flux_tensors(2, flux.order)
    facet = 3 * simplex_dimension(1, flux.order)
    change, _ = reference.flux_transform(mass.astype(float), divergence.astype(float), facet)
    there = np.einsum("naq,nm,cm->caq", raw, change, fields[:, :, 0])
    return np.asarray(flux.form.mesh.spans @ there / flux.form.jacobian[:, None, None])


def integral(mesh: Mesh, function: Array) -> float:
    jacobian = np.abs(np.linalg.det(mesh.spans))
    return float(np.einsum("c,q,cq->", jacobian, WEIGHTS, function))


def bump(x: Array, y: Array) -> tuple[Array, Array, Array]:
    """u = x (1 - x) y (1 - y), zero on the boundary of the square: u, grad u, and div grad u."""
    slope = np.stack([(1 - 2 * x) * y * (1 - y), x * (1 - x) * (1 - 2 * y)], axis=1)
    return x * (1 - x) * y * (1 - y), slope, -2 * (x * (1 - x) + y * (1 - y))


def wave(x: Array, y: Array) -> tuple[Array, Array, Array]:
    """u = (3 x^2 - 2 x^3)(3 y^2 - 2 y^3), whose normal derivative vanishes on the boundary of the square."""
    f, g = 3 * x**2 - 2 * x**3, 3 * y**2 - 2 * y**3
    slope = np.stack([6 * x * (1 - x) * g, 6 * y * (1 - y) * f], axis=1)
    return f * g, slope, (6 - 12 * x) * g + (6 - 12 * y) * f


@pytest.mark.parametrize("order", [2, 3, 4, 6])
@pytest.mark.parametrize("seed", [0, 1])
def test_identity_of_prager_and_synge(seed: int, order: int) -> None:
    """|grad (u - v)|^2 + |grad u - s|^2 = |s - grad v|^2 for div s = div grad u, u and v zero on the boundary.

    With v = 0 the left side is known in closed form: |grad u|^2 = 1/45. From order 3 on s = grad u.
    """
    mesh = random_square(25, seed)
    flux = space(mesh, everywhere(mesh), order)
    x, y = places(mesh).swapaxes(0, 1)
    _, slope, source = bump(x, y)
    fields = flux.equilibrate(moments(flux, source))
    found = values(flux, fields)
    energy = integral(mesh, (found**2).sum(axis=1))
    error = integral(mesh, ((found - slope) ** 2).sum(axis=1))
    assert flux.energy_gram(fields).matrix[0, 0] == pytest.approx(energy, rel=1e-11)
    assert energy == pytest.approx(1 / 45 + error, rel=1e-10)
    if order >= 3:
        assert error < 1e-20
    else:
        assert 1e-8 < error < 1e-4


@pytest.mark.parametrize("order", [5, 6])
def test_a_free_boundary_gives_the_gradient_too(order: int) -> None:
    """No Dirichlet part: the field is grad u of the Neumann problem."""
    mesh = random_square(15, 3)
    flux = space(mesh, nowhere(mesh), order)
    x, y = places(mesh).swapaxes(0, 1)
    _, slope, source = wave(x, y)
    found = values(flux, flux.equilibrate(moments(flux, source)))
    assert integral(mesh, ((found - slope) ** 2).sum(axis=1)) < 1e-18


@pytest.mark.parametrize("name", ["held", "free", "one side"])
@pytest.mark.parametrize("order", [1, 3, 5])
def test_divergence_and_normal_traces(order: int, name: str) -> None:
    mesh = random_square(25, 4)
    bottom = np.all(mesh.points[mesh.facets][:, :, 1] == 0, axis=1)
    held = {"held": everywhere(mesh), "free": nowhere(mesh), "one side": everywhere(mesh) & bottom}[name]
    flux = space(mesh, held, order)
    count = simplex_dimension(2, order)
    sources = np.random.default_rng(order).standard_normal((len(mesh.cells), count, 2))
    sources *= flux.form.jacobian[:, None, None]
    if name == "free":
        # What flows in must flow out.
        sources[:, 0] -= flux.form.jacobian[:, None] * (sources[:, 0].sum(axis=0) / flux.form.jacobian.sum())
    fields = flux.equilibrate(sources)
    spread, doubt = flux.divergence_moments(fields)
    assert np.all(np.abs(spread - sources) <= 1e-9 * np.abs(sources).max())
    assert np.all(doubt < 1e-10)

    facet = flux.reference.facet
    outflow = fields[:, :facet].reshape(len(fields), 3, -1, 2)
    for number, (one, other) in enumerate(mesh.facet_cells):
        first = outflow[one, list(mesh.cell_facets[one]).index(number)]
        if other >= 0:
            second = outflow[other, list(mesh.cell_facets[other]).index(number)]
            np.testing.assert_array_equal(first, -second)
        elif not held[number]:
            np.testing.assert_array_equal(first, 0)


def test_no_field_of_the_same_divergence_has_less_energy() -> None:
    """Adding any field that the space has for zero sources, with random bubbles, only adds energy."""
    mesh = random_square(20, 6)
    flux = space(mesh, everywhere(mesh), 3)
    x, y = places(mesh).swapaxes(0, 1)
    best = flux.equilibrate(moments(flux, np.exp(x - y)))
    least = flux.energy_gram(best).matrix[0, 0]
    random = np.random.default_rng(0)
    facet, free = flux.reference.facet, flux.reference.free
    for _ in range(5):
        extra = np.zeros_like(best)
        extra[:, facet : facet + free] = random.standard_normal((len(best), free, 1))
        change = 1e-3 * extra
        more = flux.energy_gram(best + change).matrix[0, 0]
        own = flux.energy_gram(change).matrix[0, 0]
        assert more == pytest.approx(least + own, rel=1e-9)


def graded(exponent: str) -> Mesh:
    """An L-shape graded toward its re-entrant corner: to 1e-7 of its size held, to 1e-12 and less half held."""
    ring = [(0, 0), (0, -1), (1, -1), (1, 1), (-1, 1), (-1, 0)]
    edges = np.column_stack([np.arange(6), (np.arange(6) + 1) % 6])
    part = np.array([0, 1, 1, 1, 1, 1]) if exponent == "1/3" else np.zeros(6, dtype=int)
    parts = (BoundaryPart("held", "dirichlet"), BoundaryPart("free", "neumann"))
    domain = PlaneDomain(np.array(ring, dtype=float), edges, np.zeros(6, dtype=int), part, parts)
    return mesh_domain(domain, size=0.5, target=1e-8)


@pytest.mark.parametrize("exponent", ["2/3", "1/3"])
@pytest.mark.parametrize("order", [3, 6])
def test_divergence_is_met_in_the_smallest_cells_too(order: int, exponent: str) -> None:
    """What is left of the divergence, squared and integrated, hardly counts against the source.

    It enters the lower bounds like that; on a cell of area 1e-24 a small error of the outflow is a large divergence.
    A hundredth of the accuracy for which this mesh is graded.
    """
    mesh = graded(exponent)
    flux = space(mesh, np.asarray(mesh.part == 0), order)
    sources = np.zeros((len(mesh.cells), simplex_dimension(2, order), 1))
    sources[:, 0] = np.sqrt(0.5) * flux.form.jacobian[:, None]
    spread, _ = flux.divergence_moments(flux.equilibrate(sources))
    left = ((spread - sources) ** 2 / flux.form.jacobian[:, None, None]).sum()
    assert left <= 1e-10 * (sources**2 / flux.form.jacobian[:, None, None]).sum()
