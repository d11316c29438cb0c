"""Meshes of the shapes that the service must handle, and of random ones."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from meshing_shapes import (
    SHAPES,
    SQUARE,
    check_mesh,
    comb,
    domain,
    notched,
    perimeters,
    shoreline,
    square_hole,
)
from skfem import MeshTri

from service.meshing.generate import mesh_domain
from service.meshing.quality import edge_vectors, flatness, longest_edges


@pytest.mark.parametrize("name", SHAPES)
@pytest.mark.parametrize("target", [1e-3, 1e-7])
def test_every_shape_is_covered_once(name, target):
    mesh = mesh_domain(SHAPES[name], size=0.3, target=target)
    check_mesh(mesh, SHAPES[name])


@pytest.mark.parametrize(
    ("name", "size", "most"),
    [
        ("square", 0.5, 20),
        ("L-shape", 0.5, 40),
        ("strip 1e-3", 0.25, 100),
        ("strip 1e-6", 0.25, 15_000),
        ("tiny hole", 0.5, 200),
        ("comb", 0.5, 400),
        ("notch 359", 0.5, 100),
        ("shoreline", 0.3, 1300),
    ],
)
def test_meshes_are_small(name, size, most):
    assert len(mesh_domain(SHAPES[name], size=size, target=1e-3).cells) <= most


def test_small_features_cost_only_logarithms():
    """A thousand times thinner costs about as many triangles again, not a thousand times as many.

    Of a strip this is so where the limit leaves no room for triangles that are less flat.
    """
    counts = [
        len(mesh_domain(SHAPES[name], size=0.25, target=1e-3, max_cells=100).cells)
        for name in ("strip 1e-3", "strip 1e-6")
    ]
    assert counts[1] <= 2.5 * counts[0]
    counts = [len(mesh_domain(SHAPES[name], size=0.25, target=1e-3).cells) for name in ("tiny hole", "tiniest hole")]
    assert counts[1] <= 2.5 * counts[0]


def test_edges_keep_to_the_size():
    for size in (0.5, 0.25, 0.1):
        mesh = mesh_domain(SHAPES["square"], size=size, target=1e-3)
        assert longest_edges(mesh).max() <= 1.5 * size
        outer = mesh.points[mesh.facets[mesh.part >= 0]]
        assert np.hypot(*(outer[:, 1] - outer[:, 0]).T).max() <= size * (1 + 1e-6)


def test_smaller_sizes_give_more_triangles():
    counts = [len(mesh_domain(SHAPES["L-shape"], size=size, target=1e-3).cells) for size in (0.5, 0.2, 0.08)]
    assert counts[0] < counts[1] < counts[2]


def test_vertices_of_the_polygon_come_first():
    shape = SHAPES["tiny hole"]
    mesh = mesh_domain(shape, size=0.3, target=1e-3)
    user = np.array(mesh.origin) + mesh.unit * mesh.points[: len(shape.points)]
    assert np.array_equal(user, shape.points)


def test_parts_lie_on_their_edges():
    shape = SHAPES["segment held"]
    mesh = mesh_domain(shape, size=0.25, target=1e-6)
    user = np.array(mesh.origin) + mesh.unit * mesh.points
    held = user[mesh.facets[mesh.part == 0]].reshape(-1, 2)
    assert (held[:, 1] == 0).all()
    assert held[:, 0].min() == pytest.approx(0.3, abs=1e-15)
    assert held[:, 0].max() == pytest.approx(0.6, abs=1e-15)
    assert perimeters(mesh) == pytest.approx([0.3, 3.7], rel=1e-13)


def test_unit_is_a_power_of_two_that_puts_the_diameter_between_one_and_two():
    for factor in (1e-9, 1e-3, 1.0, 7.0, 1e6):
        shape = domain(factor * np.array(comb(3)))
        mesh = mesh_domain(shape, size=0.3, target=1e-3)
        assert np.frexp(mesh.unit)[0] == 0.5
        assert 1 <= factor * np.hypot(1.0, 1.2) / mesh.unit < 2
        check_mesh(mesh, shape)


def test_a_power_of_two_changes_the_unit_alone():
    plain = mesh_domain(domain(comb(3)), size=0.3, target=1e-4)
    large = mesh_domain(domain(1024 * np.array(comb(3))), size=0.3, target=1e-4)
    assert large.unit == 1024 * plain.unit
    assert np.array_equal(plain.cells, large.cells)
    assert np.array_equal(plain.spans, large.spans)


def test_kilometres_and_millimetres_give_alike_meshes():
    plain = mesh_domain(domain(notched(359)), size=0.3, target=1e-4)
    for factor in (1e-3, 1e3):
        other = mesh_domain(domain(factor * np.array(notched(359))), size=0.3, target=1e-4)
        # 1000 is no power of two, so lengths against ``size`` differ by up to a factor of two.
        assert 0.4 < len(other.cells) / len(plain.cells) < 2.5
        check_mesh(other, domain(factor * np.array(notched(359))))


def test_a_far_origin_loses_nothing():
    """Coordinates near 5e6: the differences of the given doubles are what counts."""
    near = mesh_domain(domain(50 * np.array(comb(4, 0.125))), size=0.3, target=1e-4)
    far = mesh_domain(domain(50 * np.array(comb(4, 0.125)) + 2.0**22), size=0.3, target=1e-4)
    assert len(near.cells) == len(far.cells)
    assert np.abs(near.spans - far.spans).max() < 1e-9
    assert far.shape_error < 1e-11


def test_the_mesh_is_valid_for_another_library():
    for name in ("L-shape", "comb", "tiny hole"):
        mesh = mesh_domain(SHAPES[name], size=0.4, target=1e-3)
        other = MeshTri(np.ascontiguousarray(mesh.points.T), np.ascontiguousarray(mesh.cells.T))
        assert other.is_valid(raise_=True)
        assert other.facets.shape[1] == len(mesh.facets)
        assert len(other.boundary_facets()) == (mesh.part >= 0).sum()
        assert np.array_equal(np.sort(other.facets.T, axis=1), mesh.facets)
        assert (
            abs(np.abs(np.linalg.det(mesh.spans)).sum() - np.abs(other.mapping().detDF(np.zeros((2, 1)))).sum()) < 1e-12
        )


def test_corner_layers_go_below_the_digits_of_coordinates():
    """Dirichlet to Neumann across 359°: exponent 1/4, the deepest grading there is."""
    shape = domain(notched(359), conditions="nnndddn")
    mesh = mesh_domain(shape, size=0.25, target=1e-8)
    at_corner = (mesh.cells == 3).any(axis=1)
    assert longest_edges(mesh)[at_corner].max() < 2e-14
    assert longest_edges(mesh)[at_corner].min() >= 1e-14 / 4
    assert flatness(mesh)[at_corner].max() < 10
    check_mesh(mesh, shape)


def test_small_dirichlet_parts_are_graded_as_deep_as_large_ones():
    """Relative to the hole the smallest cell is alike; a hole without condition matters less and less."""
    depth = {}
    for conditions in ("dddddddd", "ddddnnnn"):
        for side in (0.1, 1e-4):
            shape = domain(SQUARE, square_hole(0.7, 0.6, side), conditions=conditions)
            mesh = mesh_domain(shape, size=0.3, target=1e-6)
            depth[conditions, side] = longest_edges(mesh).min() * mesh.unit / side
    assert depth["dddddddd", 0.1] / 20 < depth["dddddddd", 1e-4] < 20 * depth["dddddddd", 0.1]
    assert depth["ddddnnnn", 1e-4] > 100 * depth["dddddddd", 1e-4]


def test_no_triangle_has_two_graded_corners():
    """Graded are the corners with far smaller cells than without a target: feet of teeth, holes."""
    for shape in (domain(comb(10)), SHAPES["four holes"]):
        mesh = mesh_domain(shape, size=0.5, target=1e-6)
        shortest = np.full(len(mesh.points), np.inf)
        lengths = np.sqrt((edge_vectors(mesh) ** 2).sum(axis=2)).min(axis=1)
        np.minimum.at(shortest, mesh.cells, lengths[:, None])
        plain = mesh_domain(shape, size=0.5, target=1e6)
        graded = np.flatnonzero(shortest[: len(shape.points)] < 0.01 * longest_edges(plain).min())
        assert len(graded) >= 16
        assert (np.isin(mesh.cells, graded).sum(axis=1) <= 1).all()


@st.composite
def polygons(draw):
    """Star-shaped rings with random conditions, radii over two orders of magnitude."""
    count = draw(st.integers(5, 14))
    gaps = draw(st.lists(st.floats(0.2, 1.0), min_size=count, max_size=count))
    radii = draw(st.lists(st.floats(-2.0, 0.0), min_size=count, max_size=count))
    letters = "".join(draw(st.lists(st.sampled_from("dn"), min_size=count, max_size=count)))
    angle = 2 * np.pi * np.cumsum(gaps) / np.sum(gaps)
    radius = 10.0 ** np.array(radii)
    return domain(np.column_stack([radius * np.cos(angle), radius * np.sin(angle)]), conditions=letters)


@settings(max_examples=40, deadline=None, derandomize=True)
@given(polygons(), st.sampled_from([0.5, 0.2]), st.sampled_from([1e-2, 1e-6]))
def test_random_polygons(shape, size, target):
    mesh = mesh_domain(shape, size=size, target=target)
    check_mesh(mesh, shape)
    assert len(mesh.cells) < 3000


@pytest.mark.slow
def test_thousands_of_vertices():
    shape = domain(shoreline(5000))
    mesh = mesh_domain(shape, size=0.3, target=1e-3)
    check_mesh(mesh, shape)
    assert len(mesh.cells) < 60_000
