"""Forms on cells: metrics in rational arithmetic, what uncertain shapes do, coefficient modes, sums of forms."""

from fractions import Fraction

import numpy as np
import pytest
from numpy.typing import NDArray

from service.elements.quadrature import simplex_rule
from service.forms.form import (
    Form,
    Pencil,
    constant_form,
    laplace,
)
from service.forms.modes import coefficient_modes, degree_of, suprema
from service.meshing.facets import build_facets
from service.meshing.mesh import Mesh
from service.meshing.triangulation import sort_vertices

Array = NDArray[np.float64]


def triangle(corners: Array, shape_error: float = 0.0) -> Mesh:
    """One cell."""
    spans = (corners[1:] - corners[:1]).T[None]
    cells, spans = sort_vertices(np.array([[0, 1, 2]]), spans)
    facets = build_facets(cells)
    part = np.zeros(3, dtype=np.int64)
    return Mesh(
        points=corners,
        cells=cells,
        spans=spans,
        facets=facets.vertices,
        cell_facets=facets.cell_facets,
        facet_cells=facets.facet_cells,
        part=part,
        unit=1.0,
        shape_error=shape_error,
    )


def random_corners(random: np.random.Generator, thinness: float) -> Array:
    """Corners of a triangle down to so many powers of ten as high as long, turned and scaled."""
    height, turn = 10.0 ** random.uniform(-thinness, 0), random.uniform(0, 2 * np.pi)
    rotation = np.array([[np.cos(turn), -np.sin(turn)], [np.sin(turn), np.cos(turn)]])
    corners = np.array([[0, 0], [1, 0], [random.uniform(-0.2, 1.2), height]])
    return np.asarray(2.0 ** random.integers(-20, 20) * corners @ rotation.T)


def free(mesh: Mesh) -> NDArray[np.bool_]:
    return np.zeros(len(mesh.facets), dtype=bool)


def exact_metric(spans: Array, diffusion: Array) -> NDArray[np.object_]:
    """J^-1 G J^-T det J in rational arithmetic."""
    (a, b), (c, d) = ((Fraction(float(x)) for x in row) for row in spans)
    determinant = a * d - b * c
    inverse = np.array([[d, -b], [-c, a]]) / determinant
    tensor = np.array([[Fraction(float(x)) for x in row] for row in diffusion])
    return np.asarray(inverse @ tensor @ inverse.T * abs(determinant))


@pytest.mark.parametrize("thinness", [0.0, 2.0, 4.0])
def test_metric_error_bounds_the_rounding_of_the_metric(thinness: float) -> None:
    """(1 - e) M <= M' <= (1 + e) M as forms, M' in rational arithmetic, for isotropic diffusion."""
    random = np.random.default_rng(1)
    for _ in range(60):
        mesh = triangle(random_corners(random, thinness))
        form = constant_form(mesh, free(mesh), diffusion=float(random.uniform(0.1, 10)))
        exact = exact_metric(mesh.spans[0], form.diffusion[0, 0])
        computed = np.array([[Fraction(float(x)) for x in row] for row in form.gradient_metric[0, 0]])
        error = (exact - computed).astype(float)
        root = np.linalg.inv(np.linalg.cholesky(form.gradient_metric[0, 0]))
        relative = np.linalg.norm(root @ error @ root.T, 2)
        assert relative <= form.metric_error
        assert abs(float(Fraction(float(form.jacobian[0])) / exact_area(mesh.spans[0]) - 1)) <= form.metric_error


@pytest.mark.parametrize("condition", [1e2, 1e4, 1e6])
def test_metric_error_holds_for_anisotropic_diffusion_too(condition: float) -> None:
    random = np.random.default_rng(2)
    for _ in range(60):
        mesh = triangle(random_corners(random, 1.0))
        rotation = np.linalg.qr(random.standard_normal((2, 2)))[0]
        tensor = rotation * np.array([1.0, condition]) @ rotation.T
        form = constant_form(mesh, free(mesh), diffusion=(tensor + tensor.T) / 2)
        exact = exact_metric(mesh.spans[0], form.diffusion[0, 0])
        computed = np.array([[Fraction(float(x)) for x in row] for row in form.gradient_metric[0, 0]])
        error = (exact - computed).astype(float)
        root = np.linalg.inv(np.linalg.cholesky(form.gradient_metric[0, 0]))
        assert np.linalg.norm(root @ error @ root.T, 2) <= form.metric_error


def exact_area(spans: Array) -> Fraction:
    (a, b), (c, d) = ((Fraction(float(x)) for x in row) for row in spans)
    return abs(a * d - b * c)


def test_metrics_of_known_triangles() -> None:
    """Right isosceles, legs L: the metric is the identity whatever L; K = diag(2, 3) shows as it is (closed form)."""
    for length in (1.0, 0.125, 1024.0):
        mesh = triangle(length * np.array([[0, 0], [1, 0], [0, 1]]))
        isotropic = constant_form(mesh, free(mesh), diffusion=1.0)
        np.testing.assert_allclose(isotropic.gradient_metric[0, 0], np.eye(2), rtol=2e-15, atol=2e-15)
        tensor = np.diag([2.0, 3.0])
        other = constant_form(mesh, free(mesh), diffusion=tensor)
        np.testing.assert_allclose(other.gradient_metric[0, 0], tensor, rtol=2e-15, atol=2e-15)
        assert isotropic.jacobian[0] == pytest.approx(length**2, rel=1e-15)


def test_facet_measures() -> None:
    """A 3-4-5 triangle."""
    mesh = triangle(np.array([[0.0, 0.0], [4.0, 0.0], [0.0, 3.0]]))
    form = constant_form(mesh, free(mesh))
    np.testing.assert_allclose(form.facet_measure[mesh.cell_facets[0]], [5, 3, 4], rtol=1e-15)


def quadratic(form: Form, slope: Array, at: float) -> float:
    """The form of an affine function of given gradient and mean square on the cell."""
    area = form.jacobian[0] / 2
    return float(area * (slope @ form.diffusion[0, 0] @ slope + form.potential[0, 0] * at))


@pytest.mark.parametrize("anisotropy", [1.0, 100.0])
@pytest.mark.parametrize("error", [1e-10, 1e-4, 1e-3])
def test_true_forms_lie_between_the_lowered_and_the_raised(error: float, anisotropy: float) -> None:
    """Cells deformed by I + F, |F| <= error: gradients by (I + F)^-T, areas by det(I + F)."""
    random = np.random.default_rng(3)
    for _ in range(50):
        mesh = triangle(random_corners(random, 1.0), shape_error=error)
        rotation = np.linalg.qr(random.standard_normal((2, 2)))[0]
        tensor = rotation * np.array([1.0, anisotropy]) @ rotation.T
        potential = float(random.uniform(-3, 3))
        form = constant_form(mesh, free(mesh), diffusion=(tensor + tensor.T) / 2, potential=potential)
        below, above = form.moved(-1.0), form.moved(1.0)
        shape = random.standard_normal((2, 2))
        shape = np.eye(2) + error * shape / np.linalg.norm(shape, 2)
        stretch = np.linalg.det(shape)
        for _ in range(10):
            slope, square = random.standard_normal(2), float(random.uniform(0, 5))
            true_slope = np.linalg.solve(shape.T, slope)
            area = stretch * form.jacobian[0] / 2
            true = area * (true_slope @ form.diffusion[0, 0] @ true_slope + potential * square)
            assert quadratic(below, slope, square) <= true <= quadratic(above, slope, square)


@pytest.mark.parametrize("anisotropy", [1.0, 100.0])
def test_ratio_error_bounds_the_ratios_of_deformed_cells(anisotropy: float) -> None:
    random = np.random.default_rng(4)
    for _ in range(50):
        mesh = triangle(random_corners(random, 1.0), shape_error=1e-4)
        rotation = np.linalg.qr(random.standard_normal((2, 2)))[0]
        tensor = rotation * np.array([1.0, anisotropy]) @ rotation.T
        energy = constant_form(mesh, free(mesh), diffusion=(tensor + tensor.T) / 2)
        pencil = Pencil(energy, constant_form(mesh, free(mesh), potential=1.0))
        for _ in range(10):
            shape = random.standard_normal((2, 2))
            shape = np.eye(2) + 1e-4 * shape / np.linalg.norm(shape, 2)
            slope = random.standard_normal(2)
            true_slope = np.linalg.solve(shape.T, slope)
            # Areas cancel in the ratio.
            true = (true_slope @ tensor @ true_slope) / (slope @ tensor @ slope)
            assert abs(true - 1) <= pencil.ratio_error


def test_sums_and_shifts() -> None:
    mesh = triangle(np.array([[0.0, 0.0], [1.0, 0.0], [0.0, 1.0]]))
    pencil = laplace(mesh, free(mesh))
    shifted = pencil.shifted(5.0)
    assert shifted.energy.potential[0, 0] == 5.0
    assert pencil.at(3.0).potential[0, 0] == -3.0
    np.testing.assert_array_equal(pencil.at(3.0).diffusion, pencil.energy.diffusion)
    assert shifted.weight is pencil.weight


@pytest.mark.parametrize("dimension", [1, 2])
@pytest.mark.parametrize("degree", [0, 1, 2, 3, 4])
def test_suprema_bound_the_modes(dimension: int, degree: int) -> None:
    """Against values on a fine set of points; the constant mode is one, and no bound is wild."""
    modes = degree + 1 if dimension == 1 else (degree + 1) * (degree + 2) // 2
    assert degree_of(dimension, modes) == degree
    points, _ = simplex_rule(dimension, 60)
    corners = np.hstack([np.zeros((dimension, 1)), np.eye(dimension)])
    points = np.hstack([points, corners])
    values = np.abs(coefficient_modes(dimension, modes, points)).max(axis=1)
    bounds = suprema(dimension, modes)
    assert bounds[0] == pytest.approx(1.0, rel=1e-8)
    assert np.all(values <= bounds)
    assert np.all(bounds <= 10 * values)


def test_coefficient_modes_are_orthogonal_and_start_with_one() -> None:
    points, weights = simplex_rule(2, 12)
    values = coefficient_modes(2, 10, points)
    np.testing.assert_allclose(values[0], 1.0, rtol=1e-13)
    gram = 2 * (values * weights) @ values.T
    np.testing.assert_allclose(gram, np.eye(10), atol=1e-13)


def test_swings_bound_how_far_coefficients_stray_from_their_means() -> None:
    random = np.random.default_rng(5)
    points, _ = simplex_rule(2, 20)
    modes = coefficient_modes(2, 6, points)
    mesh = triangle(np.array([[0.0, 0.0], [1.0, 0.0], [0.0, 1.0]]))
    plain = constant_form(mesh, free(mesh), diffusion=1.0)
    for _ in range(30):
        factors = random.standard_normal((1, 6))
        form = Form(
            mesh,
            plain.dirichlet,
            plain.diffusion,
            factors,
            plain.facet,
            plain.diffusion_error,
            plain.potential_error,
            plain.facet_error,
        )
        values = (factors @ modes)[0]
        assert np.abs(values - factors[0, 0]).max() <= form.potential_swing[0]


def test_the_floor_of_a_variable_diffusion_lies_below_it() -> None:
    random = np.random.default_rng(6)
    points, _ = simplex_rule(2, 20)
    modes = coefficient_modes(2, 3, points)
    mesh = triangle(np.array([[0.0, 0.0], [1.0, 0.0], [0.0, 1.0]]))
    plain = constant_form(mesh, free(mesh), diffusion=1.0)
    for _ in range(30):
        rough = 0.1 * random.standard_normal((1, 3, 2, 2))
        factors = rough + rough.swapaxes(2, 3)
        factors[0, 0] += 2 * np.eye(2)
        form = Form(
            mesh,
            plain.dirichlet,
            factors,
            plain.potential,
            plain.facet,
            plain.diffusion_error,
            plain.potential_error,
            plain.facet_error,
        )
        for weights in modes.T:
            there = np.einsum("m,mab->ab", weights, factors[0])
            assert np.linalg.eigvalsh(there - form.diffusion_floor[0])[0] >= -1e-14
