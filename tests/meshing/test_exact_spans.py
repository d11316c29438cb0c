"""Spans are exact where they claim to be, and the shape error covers what they are not."""

from fractions import Fraction

import numpy as np
import pytest
from meshing_shapes import SHAPES, check_mesh, domain, shoreline, turned

from service.meshing.generate import displacements, mesh_domain
from service.meshing.grade import grade
from service.meshing.mesh import Mesh
from service.meshing.normalise import normalise
from service.meshing.refine import refine
from service.meshing.sizing import size_function, subdivide
from service.meshing.triangulation import Triangulation, base_spans


def rational(spans: np.ndarray) -> np.ndarray:
    return np.vectorize(Fraction, otypes=[object])(spans)


def determinants(spans: np.ndarray) -> np.ndarray:
    exact = rational(spans)
    return exact[:, 0, 0] * exact[:, 1, 1] - exact[:, 0, 1] * exact[:, 1, 0]


def one_triangle(corners: np.ndarray) -> Triangulation:
    cells = np.array([[0, 1, 2]])
    spans, error = base_spans(corners, cells, np.zeros((3, 2)))
    boundary = np.array([[0, 1], [1, 2], [2, 0]])
    return Triangulation(corners, cells, spans, error, boundary, np.array([0, 1, 2]))


CORNERS = [
    np.array([[0.1, 0.2], [0.7, 0.3], [0.35, 0.91]]),
    np.array([[0.1, 1 / 3], [0.9, 1 / 3 + 1e-7], [0.3, 1 / 3 + 1e-5]]),
    np.array([[1e-9, 0.3], [0.2, 0.7], [3e-9, 0.30000001]]),
]


@pytest.mark.parametrize("corners", CORNERS)
@pytest.mark.parametrize("corner", [0, 1, 2])
def test_layers_partition_their_triangle_without_any_rounding(corners, corner):
    base = one_triangle(corners)
    layers = np.zeros(3, dtype=np.int64)
    layers[corner] = 30
    fan = grade(base, layers)
    assert len(fan.cells) == 61
    exact = determinants(fan.spans)
    assert (exact > 0).all()
    assert exact.sum() == determinants(base.spans)[0]
    # The innermost triangle is the parent turned so that the corner comes first, times 4^-30.
    tip = fan.spans[(fan.cells == corner).any(axis=1)][0] * 4.0**30
    places = np.column_stack([np.zeros(2), base.spans[0]])
    turned_places = np.roll(places, -corner, axis=1)
    assert np.array_equal(tip, turned_places[:, 1:] - turned_places[:, :1])
    assert np.bincount(fan.part).tolist() == [31 if corner in pair else 1 for pair in ((0, 1), (1, 2), (2, 0))]


@pytest.mark.parametrize("name", ["L-shape", "turned strip 1e-6", "segment held", "far away"])
def test_refinement_rounds_nothing(name):
    mesh = mesh_domain(SHAPES[name], size=0.5, target=1e-6, max_cells=200)
    before = np.abs(determinants(mesh.spans))
    for level in range(1, 4):
        mesh = refine(mesh)
        check_mesh(mesh, SHAPES[name])
        children = np.abs(determinants(mesh.spans)).reshape(len(before), -1)
        assert (children == before[:, None] / 4**level).all()


def test_all_edges_of_all_cells_are_exact_differences():
    mesh = refine(refine(mesh_domain(SHAPES["notch 359"], size=0.4, target=1e-7)))
    first, second = rational(mesh.spans[:, :, 0]), rational(mesh.spans[:, :, 1])
    assert (rational(mesh.spans[:, :, 1] - mesh.spans[:, :, 0]) == second - first).all()


def test_cells_at_a_point_agree_on_their_common_edges():
    """Two cells see the same edge vector up to the shape error, in the smallest layers too."""
    mesh = mesh_domain(SHAPES["segment held"], size=0.3, target=1e-9)
    inside = np.flatnonzero(mesh.part < 0)
    places = np.concatenate([np.zeros_like(mesh.spans[:, :, :1]), mesh.spans], axis=2)
    vectors = []
    for side in (0, 1):
        cell = mesh.facet_cells[inside, side]
        ends = [(mesh.cells[cell] == mesh.facets[inside, i][:, None]).argmax(axis=1) for i in (0, 1)]
        vectors.append(places[cell, :, ends[1]] - places[cell, :, ends[0]])
    lengths = np.hypot(*vectors[0].T)
    assert lengths.min() < 1e-8
    assert (np.hypot(*(vectors[1] - vectors[0]).T) <= 1e-13 * lengths).all()


def true_deformation(mesh: Mesh, points: np.ndarray) -> float:
    """Largest ‖E S⁻¹‖_F over the cells whose true vertices are known exactly.

    Vertices of the polygon are the given points; inner vertices are where the mesh says.
    """
    exact = rational(mesh.points)
    exact[: len(points)] = (rational(points) - rational(np.array(mesh.origin))) / Fraction(mesh.unit)
    known = np.ones(len(mesh.points), dtype=bool)
    known[mesh.facets[mesh.part >= 0]] = False
    known[: len(points)] = True
    chosen = known[mesh.cells].all(axis=1)
    assert chosen.sum() > 50
    worst = 0.0
    for cell, spans in zip(mesh.cells[chosen], mesh.spans[chosen], strict=True):
        true = (exact[cell[1:]] - exact[cell[0]]).T
        error = (true - rational(spans)).astype(np.float64)
        worst = max(worst, float(np.linalg.norm(error @ np.linalg.inv(spans))))
    return worst


@pytest.mark.parametrize(
    "ring",
    [
        shoreline(200),
        77 * shoreline(200) + 5e6,
        shoreline(200) * [1, 1e-4],
        turned(shoreline(200) * [1, 1e-3], 20),
    ],
)
def test_the_shape_error_covers_the_true_triangles(ring):
    shape = domain(ring)
    mesh = mesh_domain(shape, size=0.3, target=1e6)
    worst = true_deformation(mesh, shape.points)
    assert 0 < worst <= mesh.shape_error
    assert mesh.shape_error <= 1000 * worst


def test_inner_points_of_edges_are_within_their_allowance():
    """Distance of boundary vertices to the true line, exactly, against what the shape error assumes."""
    shape = domain(turned([(0.1, 0.1), (1.7, 0.4), (0.9, 1.3)], 17) + 3)
    mesh = mesh_domain(shape, size=0.1, target=1e-2)
    exact = rational(mesh.points)
    true = (rational(shape.points) - rational(np.array(mesh.origin))) / Fraction(mesh.unit)
    a, along = true[0], true[1] - true[0]
    across = (exact - a)[:, 0] * along[1] - (exact - a)[:, 1] * along[0]
    distance = np.abs(across.astype(np.float64)) / np.hypot(*along.astype(np.float64))
    on_edge = distance < 1e-12
    assert on_edge.sum() > 5
    assert distance[on_edge].max() > 0
    assert distance[on_edge].max() <= 5 * 2.0**-53 * np.hypot(*np.maximum(true[0], true[1]).astype(float))


@pytest.mark.parametrize("flat", [1.0, 1e-4, 1e-7])
def test_the_bound_holds_for_every_triangle_by_itself(flat):
    """Single triangles with the worst displacements allowed: none beats its own bound, some come near."""
    generator = np.random.default_rng(11)
    cells, size = np.array([[0, 1, 2]]), 2.0**-50
    ratios = []
    for moved in [0.0] * 40 + [1.0] * 40:
        corners = generator.uniform(size=(3, 2)) * [1, flat]
        if np.linalg.det(corners[1:] - corners[0]) < 0:
            corners = corners[::-1].copy()
        signs = generator.choice([-1.0, 1.0], size=(3, 2))
        allowed = np.full((3, 2), moved * size)
        spans, bound = base_spans(corners, cells, allowed)
        exact = rational(corners) + rational(signs * allowed)
        error = ((exact[1:] - exact[0]).T - rational(spans[0])).astype(np.float64)
        ratios.append(np.linalg.norm(error @ np.linalg.inv(spans[0]), 2) / bound)
    assert max(ratios) <= 1
    assert max(ratios[:40]) > 0.1
    assert max(ratios[40:]) > 0.3


def test_corners_are_off_by_no_more_than_their_displacement():
    shape = domain(turned([(0.1, 0.1), (1.7, 0.4), (0.9, 1.3)], 17) + 1 / 3)
    frame = normalise(shape.points)
    sizes = size_function(frame.points, np.full(3, 0.3), 0.3)
    cut = subdivide(frame.points, shape.edges, sizes, np.full(3, 2))
    allowed = displacements(cut, frame.points, shape.edges, len(cut.points) + 1, shape.hosts)
    assert (allowed[-1] == 0).all()
    true = (rational(shape.points) - rational(frame.origin)) / Fraction(frame.unit)
    error = np.abs(true - rational(frame.points)).astype(np.float64)
    assert error.max() > 0
    assert (error <= allowed[:3]).all()
    assert (allowed < 2e-15).all()


def test_spans_next_to_the_grid_are_multiples_of_it():
    generator = np.random.default_rng(5)
    points = generator.uniform(size=(300, 2))
    cells = np.arange(300).reshape(-1, 3)
    turn = np.linalg.det(points[cells[:, 1:]] - points[cells[:, :1]]) < 0
    cells[turn] = cells[turn][:, ::-1]
    spans, _ = base_spans(points, cells, np.zeros((300, 2)))
    a, b = spans[:, :, 0], spans[:, :, 1]
    for computed, exact in [
        (b - a, rational(b) - rational(a)),
        (b - a / 4, rational(b) - rational(a) / 4),
        (a - b / 4, rational(a) - rational(b) / 4),
        (0.75 * a, rational(a) * Fraction(3, 4)),
    ]:
        assert (rational(computed) == exact).all()
