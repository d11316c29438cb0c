"""Sizes at vertices, local scales and the subdivision of edges."""

import numpy as np
import pytest
from meshing_shapes import SHAPES, SQUARE, domain, notched, square_hole, strip
from scipy.spatial.distance import cdist

from service.meshing.normalise import diameter, normalise
from service.meshing.scales import local_scales
from service.meshing.sizing import GROWTH, size_function, subdivide, vertex_sizes


def sizes_of(ring, *holes, size=0.5):
    shape = domain(ring, *holes)
    return vertex_sizes(shape.points, shape.edges, size)


def test_short_edges_ask_for_small_elements():
    assert sizes_of(strip(0.01)).tolist() == [0.01] * 4
    assert sizes_of(SQUARE).tolist() == [0.5] * 4


def test_gaps_inside_the_domain_ask_for_small_elements():
    sizes = sizes_of(SQUARE, square_hole(0.001, 0.3, 0.4))
    assert sizes[4:6] == pytest.approx([0.001, 0.001])
    assert sizes[6:] == pytest.approx([0.3, 0.3], abs=0.1)
    assert sizes[:4] == pytest.approx([0.3] * 4, abs=0.2)


def test_gaps_outside_the_domain_do_not_matter():
    """Across the mouth of the notch the ring comes close to itself, but not through the domain."""
    assert sizes_of(notched(359)).min() > 0.49


@pytest.mark.parametrize("turned_over", [False, True])
def test_gaps_on_both_sides_of_interfaces_ask_for_small_elements(turned_over):
    """A point of an interface 0.01 from a wall, one 0.002 from another interface; a hole 0.004 from one."""
    shape = domain(SQUARE, square_hole(0.4, 0.7, 0.1))
    inner = [(0.01, 0.2), (0.2, 0.2), (0.2, 0.4), (0.202, 0.3), (0.4, 0.2), (0.4, 0.4), (0.2, 0.804), (0.6, 0.804)]
    points = np.vstack([shape.points, inner])
    interfaces = np.array([[8, 9], [9, 10], [10, 8], [11, 12], [12, 13], [13, 11], [14, 15]])
    if turned_over:
        interfaces = interfaces[:, ::-1]
    sizes = vertex_sizes(points, shape.edges, 0.5, interfaces)
    assert sizes[[8, 11]] == pytest.approx([0.01, 0.002])
    assert sizes[[5, 6]] == pytest.approx([0.004, 0.004])
    assert (sizes[[9, 10, 12, 13]] > 0.09).all()


def test_the_size_function_is_the_minimum_of_cones():
    generator = np.random.default_rng(3)
    points, wanted = generator.uniform(size=(50, 2)), 10.0 ** generator.uniform(-4, 0, size=50)
    function = size_function(points, wanted, 0.3)
    where = generator.uniform(size=(400, 2))
    cones = np.minimum(0.3, (wanted + GROWTH * cdist(where, points)).min(axis=1))
    found = function(where)
    assert (found <= cones * (1 + 1e-12)).all()
    assert (found >= cones / np.sqrt(2) * (1 - 1e-12)).all()
    assert np.ptp(found) > 0.1


@pytest.mark.parametrize("name", SHAPES)
def test_pieces_grow_steadily(name):
    shape = SHAPES[name]
    frame = normalise(shape.points)
    wanted = vertex_sizes(frame.points, shape.edges, 0.3)
    function = size_function(frame.points, wanted, 0.3)
    cut = subdivide(frame.points, shape.edges, function, np.ones(len(shape.edges), dtype=np.int64))
    steps = cut.points[cut.edges[:, 1]] - cut.points[cut.edges[:, 0]]
    length = np.hypot(*steps.T)
    middle = cut.points[cut.edges].mean(axis=1)
    assert (length <= 1.3 * function(middle)).all()
    same = cut.parent[1:] == cut.parent[:-1]
    ratio = length[1:][same] / length[:-1][same]
    if len(ratio):
        assert max(ratio.max(), 1 / ratio.min()) < 3
    # The pieces of an edge follow one another from its start to its end.
    assert (cut.edges[1:, 0][same] == cut.edges[:-1, 1][same]).all()
    first = np.searchsorted(cut.parent, np.arange(len(shape.edges)))
    last = np.searchsorted(cut.parent, np.arange(len(shape.edges)), side="right") - 1
    assert np.array_equal(cut.edges[first, 0], shape.edges[:, 0])
    assert np.array_equal(cut.edges[last, 1], shape.edges[:, 1])
    assert np.bincount(cut.parent, length) == pytest.approx(
        np.hypot(*(frame.points[shape.edges[:, 1]] - frame.points[shape.edges[:, 0]]).T)
    )


def test_edges_are_cut_symmetrically_and_at_least_as_often_as_asked():
    shape = domain(strip(0.001))
    function = size_function(shape.points, np.full(4, 0.001), 0.25)
    cut = subdivide(shape.points, shape.edges, function, np.array([1, 3, 1, 1]))
    counts = np.bincount(cut.parent)
    assert counts[1] == 3
    assert counts[3] == 1
    lower = cut.points[4:][cut.host == 0][:, 0]
    assert lower == pytest.approx(1 - lower[::-1], abs=1e-12)
    assert 10 < counts[0] < 25


def test_diameter_and_scaling():
    points = np.random.default_rng(2).uniform(size=(700, 2))
    assert diameter(points) == cdist(points, points).max()
    for factor in (1e-200, 1e-3, 1.0, 1e100):
        frame = normalise(factor * points)
        assert 1 <= diameter(frame.points) < 2
        assert (frame.points >= 0).all()
        assert frame.origin + frame.unit * frame.points == pytest.approx(factor * points, rel=1e-14)


def test_small_dirichlet_parts_set_the_scale_around_them():
    hole = domain(SQUARE, square_hole(0.6, 0.5, 0.001))
    scales = local_scales(hole.points, hole.edges, hole.part == 0)
    assert scales[4:] == pytest.approx([0.001 * np.sqrt(2)] * 4)
    assert scales[:4] == pytest.approx(cdist(hole.points[:4], hole.points[4:]).min(axis=1), abs=0.01)
    free = domain(SQUARE, square_hole(0.6, 0.5, 0.001), conditions="ddddnnnn")
    assert (local_scales(free.points, free.edges, free.part == 0) == 1).all()
    none = domain(SQUARE, conditions="nnnn")
    assert (local_scales(none.points, none.edges, none.part == 0) == 1).all()
