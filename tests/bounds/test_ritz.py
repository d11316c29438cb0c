"""Trial functions: closed forms, monotone in order and refinement, continuous; inner products and their errors."""

import numpy as np
import pytest
from numpy.typing import NDArray
from small_meshes import everywhere, mesh_of, nowhere, random_square, square, square_ratios

from service.bounds.lehmann import upper_bounds
from service.bounds.ritz import TrialSpace
from service.elements.quadrature import simplex_rule
from service.elements.reference import scalar_tensors, scalar_transform
from service.elements.scalar import basis
from service.forms.form import Pencil, constant_form, laplace
from service.meshing.mesh import Mesh
from service.meshing.refine import refine

Array = NDArray[np.float64]


def bounds(mesh: Mesh, held: bool, order: int, count: int) -> Array:
    """Proved upper bounds of the first ratios."""
    pencil = laplace(mesh, everywhere(mesh) if held else nowhere(mesh))
    trial = TrialSpace(pencil, order)
    _, functions = trial.smallest(1.0, count, 1e-12, rounds=40)
    functions = functions[:, :, :count]
    # A shift makes A a norm on constants too.
    shifted = pencil.shifted(1.0)
    return upper_bounds(trial.gram(shifted.energy, functions), trial.gram(pencil.weight, functions)) - 1


@pytest.mark.parametrize("held", [True, False])
def test_bounds_fall_with_the_order_to_the_closed_form(held: bool) -> None:
    mesh, exact = random_square(12, 2), square_ratios(4, held)
    before = np.full(4, np.inf)
    for order in (2, 3, 4, 6, 8):
        now = bounds(mesh, held, order, 4)
        assert np.all(exact <= now * (1 + 1e-14) + 1e-12)
        assert np.all(now <= before * (1 + 1e-11) + 1e-11)
        before = now
    np.testing.assert_allclose(before, exact, rtol=1e-8, atol=1e-10)


@pytest.mark.parametrize("order", [1, 2, 3])
def test_bounds_fall_under_refinement(order: int) -> None:
    """Every function of the coarse space is one of the fine space."""
    mesh, exact = square(2), square_ratios(1, True)
    before = np.inf
    for _ in range(3):
        now = float(bounds(mesh, True, order, 1)[0])
        assert exact[0] <= now <= before * (1 + 1e-12)
        before, mesh = now, refine(mesh)


def polynomial(trial: TrialSpace, function: Array, at: Array) -> Array:
    """Coefficients of the polynomial with given values at points of every cell."""
    _, stiffness, _, _ = scalar_tensors(2, trial.order, 0)
    change = scalar_transform(stiffness[0].astype(float), trial.reference.skeleton)
    values = np.array([jet[0] for jet in basis(2, trial.order, at)])
    matrix = (change.T @ values).T
    return np.asarray(np.linalg.lstsq(matrix, function.T, rcond=None)[0].T[:, :, None])


def test_inner_products_of_a_known_function() -> None:
    """u = x (1 - x) y (1 - y): |u|^2 = 1/900, |grad u|^2 = 1/45; K = diag(2, 3) and p = 7 as well (closed forms)."""
    mesh = random_square(20, 5)
    weighted = constant_form(mesh, everywhere(mesh), diffusion=np.diag([2.0, 3.0]), potential=7.0)
    pencil = Pencil(weighted, constant_form(mesh, everywhere(mesh), potential=1.0))
    trial = TrialSpace(pencil, 5)
    points, _ = simplex_rule(2, 12)
    x, y = (mesh.points[mesh.cells[:, 0]][:, :, None] + mesh.spans @ points).swapaxes(0, 1)
    functions = polynomial(trial, x * (1 - x) * y * (1 - y), points)
    for form, exact in ((pencil.weight, 1 / 900), (weighted, (2 + 3) / 90 + 7 / 900)):
        found = trial.gram(form, functions)
        assert abs(found.matrix[0, 0] - exact) < 1e-14
        assert 0 < found.error[0, 0] < 1e-11


def test_allowances_are_small_for_functions_that_hardly_vary() -> None:
    """Gradients do not see constants: the error of |grad u|^2 is relative to the variation of u, not to its size."""
    mesh = square(4)
    trial = TrialSpace(laplace(mesh, nowhere(mesh)), 2)
    functions = np.zeros((len(mesh.cells), 6, 1))
    functions[:, :3, 0] = 1e6 + 1e-3 * mesh.points[mesh.cells][:, :, 0]
    found = trial.gram(trial.pencil.energy, functions)
    assert found.matrix[0, 0] == pytest.approx(1e-6, rel=1e-3)
    assert found.error[0, 0] < 1e-15


@pytest.mark.parametrize("orders", [(3, 4), (3, 6), (4, 7)])
def test_extended_functions_are_the_same_where_cells_meet_vertices_and_facets(orders: tuple[int, int]) -> None:
    low, high = orders
    mesh = random_square(10, 9)
    pencil = laplace(mesh, nowhere(mesh))
    coarse, fine = TrialSpace(pencil, low), TrialSpace(pencil, high)
    _, functions = coarse.smallest(1.0, 3, 1e-8)
    extended = fine.extend(functions, low)
    assert extended.shape[1] == fine.reference.mass.shape[-1]
    again = fine.numbering.spread(fine.numbering.restrict(extended))
    np.testing.assert_array_equal(again, extended)
    # Only bubbles are lost: the ratio of the extension is still an upper bound, and not a wild one.
    energy, mass = fine.gram(pencil.shifted(1.0).energy, extended), fine.gram(pencil.weight, extended)
    assert np.all(upper_bounds(energy, mass)[1:3] - 1 < 20 * np.pi**2)


@pytest.mark.parametrize("held", [True, False])
def test_functions_are_continuous_to_the_bit_and_zero_where_held(held: bool) -> None:
    """Traces agree from both sides: coefficients of vertices and facets are shared."""
    mesh = random_square(10, 1)
    dirichlet = everywhere(mesh) if held else nowhere(mesh)
    trial = TrialSpace(laplace(mesh, dirichlet), 4)
    _, functions = trial.smallest(1.0, 2, 1e-8)
    at_vertices: dict[int, set[bytes]] = {}
    on_facets: dict[int, set[bytes]] = {}
    per_facet = trial.order - 1
    for cell, (vertices, facets) in enumerate(zip(mesh.cells, mesh.cell_facets, strict=True)):
        for place, vertex in enumerate(vertices):
            at_vertices.setdefault(int(vertex), set()).add(functions[cell, place].tobytes())
        for place, facet in enumerate(facets):
            block = functions[cell, 3 + place * per_facet : 3 + (place + 1) * per_facet]
            on_facets.setdefault(int(facet), set()).add(block.tobytes())
            if dirichlet[facet]:
                assert not np.any(block)
    assert all(len(found) == 1 for found in (*at_vertices.values(), *on_facets.values()))
    for vertex in np.unique(mesh.facets[dirichlet]):
        assert not np.any(np.frombuffer(next(iter(at_vertices[int(vertex)]))))


def test_a_mesh_with_one_free_vertex() -> None:
    """Four triangles about the centre of the square: the hat function has the ratio 24 (closed form)."""
    mesh = mesh_of(
        np.array([[0, 0], [1, 0], [1, 1], [0, 1], [0.5, 0.5]]), np.array([[0, 1, 4], [1, 2, 4], [2, 3, 4], [0, 3, 4]])
    )
    assert float(bounds(mesh, True, 1, 1)[0]) == pytest.approx(24.0, rel=1e-13)
