"""What selectors select and where they split edges; lengths are elementary geometry."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from problem_documents import SQUARE, faults, inputs, lengths, multi, part, pointers, polygon, read

WIDE = polygon([[0, 0], [2, 0], [2, 1], [0, 1]])
HOLED = polygon([[0, 0], [4, 0], [4, 4], [0, 4]], [[1, 1], [3, 1], [3, 3], [1, 3]])
TRIANGLE = polygon([[0, 0], [3, 0], [3, 4]])

SELECTED = [
    # shape, selector, selected length, vertices that are added
    (WIDE, {"segment": [[0, 0], [2, 0]]}, 2, []),
    (WIDE, {"segment": [[2, 0], [0, 0]]}, 2, []),
    (WIDE, {"segment": [[0.5, 0], [1.25, 0]]}, 0.75, [[0.5, 0], [1.25, 0]]),
    (WIDE, {"segment": [[-7, 0], [1.25, 0]]}, 1.25, [[1.25, 0]]),
    (WIDE, {"segment": [[0, 0.3], [0, 5]]}, 0.7, [[0, 0.3]]),
    (TRIANGLE, {"segment": [[0, 0], [1.5, 2]]}, 2.5, [[1.5, 2]]),
    (TRIANGLE, {"segment": [[-3, -4], [6, 8]]}, 5, []),
    # several collinear edges
    (polygon([[0, 0], [1, 0], [2, 0], [2, 1], [0, 1]]), {"segment": [[0.5, 0], [1.5, 0]]}, 1, None),
    # across a gap: the notch is not selected, both teeth are
    (
        polygon([[0, 0], [3, 0], [3, 1], [2, 1], [2, 0.5], [1, 0.5], [1, 1], [0, 1]]),
        {"segment": [[0, 1], [3, 1]]},
        2,
        [],
    ),
    (WIDE, {"polyline": [[1, 0], [0, 0], [0, 0.5]]}, 1.5, [[1, 0], [0, 0.5]]),
    (WIDE, {"polyline": [[0.25, 0], [0.5, 0], [0.75, 0]]}, 0.5, [[0.25, 0], [0.75, 0]]),
    (WIDE, {"polyline": [[0.25, 0], [0.75, 0], [0.5, 0]]}, 0.5, [[0.25, 0], [0.75, 0]]),
    # a polyline may leave the boundary: only what lies on it counts
    (WIDE, {"polyline": [[0, 0], [1, 0], [1, 1], [2, 1]]}, 2, [[1, 0], [1, 1]]),
    (WIDE, {"box": [[-1, -1], [3, 3]]}, 6, []),
    (WIDE, {"box": [[0, 0], [2, 1]]}, 6, []),
    (WIDE, {"box": [[0, 0], [2, 0]]}, 2, []),
    (WIDE, {"box": [[-1, -1], [0.5, 0.25]]}, 0.75, [[0.5, 0], [0, 0.25]]),
    (WIDE, {"box": [[0.5, -1], [1.5, 2]]}, 2, [[0.5, 0], [1.5, 0], [1.5, 1], [0.5, 1]]),
    (TRIANGLE, {"box": [[0.75, 0.5], [1.5, 9]]}, 1.25, [[0.75, 1], [1.5, 2]]),
    (TRIANGLE, {"box": [[0.6, 0.9], [2.4, 1.6]]}, 0.875, [[0.675, 0.9], [1.2, 1.6]]),
    (HOLED, {"box": [[0.5, 0.5], [3.5, 3.5]]}, 8, []),
    (HOLED, {"box": [[0.5, 0.5], [3.5, 2]]}, 4, [[1, 2], [3, 2]]),
    (HOLED, "remainder", 24, []),
    (WIDE, "remainder", 6, []),
]


@pytest.mark.parametrize(("shape", "selector", "length", "added"), SELECTED)
def test_a_selector_selects_what_lies_on_it(shape, selector, length, added):
    domain = read(shape, [part("it", selector)]).domain
    assert lengths(domain)["it"] == pytest.approx(length, rel=1e-14, abs=0)
    before = read(shape).domain
    new = {tuple(point) for point in domain.points.tolist()} - {tuple(p) for p in before.points.tolist()}
    if added is None:
        assert len(new) == 2
    else:
        expected = np.array(sorted(map(tuple, added))).reshape(-1, 2)
        assert np.array(sorted(new)).reshape(-1, 2) == pytest.approx(expected, abs=1e-15)
    assert len(domain.edges) == len(before.edges) + len(new)


def test_a_selector_within_the_tolerance_is_snapped():
    """1e-9 of the diameter, here 2.2e-9, is the agreed tolerance."""
    near = {"segment": [[0.5, 1e-9], [1.5, -1e-9]]}
    domain = read(WIDE, [part("it", near)]).domain
    assert [0.5, 0] in domain.points.tolist()
    assert [1.5, 0] in domain.points.tolist()
    assert pointers(inputs(WIDE, [part("it", {"segment": [[0.5, 3e-9], [1.5, 3e-9]]})])) == ["/problem/boundary/0/on"]


def test_an_end_near_a_vertex_is_the_vertex():
    domain = read(WIDE, [part("it", {"segment": [[1e-9, 0], [2 - 1e-9, 0]]})]).domain
    assert len(domain.points) == 4
    assert lengths(domain)["it"] == 2


def test_the_tolerance_does_not_confuse_the_sides_of_a_thin_domain():
    """Its width, 1.5e-9, is less than 1e-9 of its diameter, 2."""
    thin = polygon([[-1, 0], [1, 0], [1, 1.5e-9], [-1, 1.5e-9]])
    domain = read(thin, [part("low", {"segment": [[-1, 0], [1, 0]]})]).domain
    assert lengths(domain)["low"] == 2


def test_ends_of_neighbours_that_differ_by_rounding_are_one_vertex():
    end = 0.1 + 0.2
    assert end != 0.3
    parts = [part("a", {"segment": [[0, 0], [end, 0]]}), part("b", {"segment": [[0.3, 0], [1, 0]]})]
    domain = read(WIDE, parts).domain
    assert len(domain.points) == 6
    assert lengths(domain)["a"] + lengths(domain)["b"] == pytest.approx(1, abs=1e-15)


def test_split_vertices_are_the_ends_that_were_given():
    third = 1 / 3
    domain = read(WIDE, [part("it", {"segment": [[third, 0], [2 * third, 0]]})]).domain
    assert domain.points[1:3].tolist() == [[third, 0], [2 * third, 0]]


@given(st.floats(0.6, 1.9), st.floats(0.3, 0.7), st.floats(2, 3))
def test_a_box_splits_edges_along_the_axes_exactly_at_its_border(x, y, right):
    shape = polygon([[0.1, 0.2], [right, 0.2], [right, 0.8], [0.1, 0.8]])
    points = read(shape, [part("it", {"box": [[0, 0], [x, y]]})]).domain.points.tolist()
    assert [x, 0.2] in points
    assert [0.1, y] in points


def test_ends_on_a_slanted_edge_are_moved_onto_it():
    ring = [[0, 0], [3, 1], [0, 1]]
    end = [1.2, 0.4 + 1e-10]
    domain = read(polygon(ring), [part("it", {"segment": [[0, 0], end]})]).domain
    (new,) = [point for point in domain.points.tolist() if point not in ring]
    assert abs(3 * new[1] - new[0]) < 1e-15
    assert math.hypot(new[0] - end[0], new[1] - end[1]) <= 1.0001e-10


def test_parts_come_in_the_order_of_the_document():
    parts = [part("b", "remainder", "neumann"), part("a", {"segment": [[0, 0], [2, 0]]})]
    domain = read(WIDE, parts).domain
    assert [(p.name, p.condition) for p in domain.parts] == [("b", "neumann"), ("a", "dirichlet")]
    assert domain.part.tolist() == [1, 0, 0, 0]


def test_parts_may_share_a_point_and_touch_in_a_box_corner():
    parts = [
        part("a", {"segment": [[0, 0], [1, 0]]}),
        part("b", {"segment": [[1, 0], [2, 0]]}),
        part("c", {"box": [[2, 0], [2, 1]]}),
    ]
    assert lengths(read(WIDE, parts).domain) == {"a": 1, "b": 1, "c": 1, "rest of the boundary": 3}


def test_what_no_part_selects_is_natural_and_warned_of():
    request = read(WIDE, [part("it", {"segment": [[0, 0], [1.5, 0]]})])
    assert [(p.name, p.condition) for p in request.domain.parts] == [
        ("it", "dirichlet"),
        ("rest of the boundary", "neumann"),
    ]
    (warning,) = request.warnings
    assert "75 %" in warning
    assert "4.5 m of 6 m" in warning
    assert "rest of the boundary" in warning


def test_without_parts_the_whole_boundary_is_natural():
    request = read(WIDE)
    assert [(p.name, p.condition) for p in request.domain.parts] == [("boundary", "neumann")]
    (warning,) = request.warnings
    assert "100 %" in warning
    assert request.domain.part.tolist() == [0, 0, 0, 0]


def test_the_name_of_the_rest_is_its_own():
    names = ["rest of the boundary", "rest of the boundary (2)"]
    parts = [part(names[0], {"segment": [[0, 0], [1, 0]]}), part(names[1], {"segment": [[1, 0], [2, 0]]})]
    assert read(WIDE, parts).domain.parts[-1].name == "rest of the boundary (3)"


def test_no_warning_where_the_parts_cover_everything():
    parts = [part("a", {"box": [[0, 0], [2, 0]]}), part("b", {"polyline": [[2, 0], [2, 1], [0, 1], [0, 0]]})]
    request = read(WIDE, parts)
    assert request.warnings == ()
    assert lengths(request.domain) == {"a": 2, "b": 4}


def test_every_selector_that_matches_nothing_is_named():
    inside = {"segment": [[0.5, 0.5], [1, 0.5]]}
    parts = [part("a", inside), part("b", {"segment": [[0, 0], [2, 0]]}), part("c", inside)]
    assert pointers(inputs(WIDE, parts)) == ["/problem/boundary/0/on", "/problem/boundary/2/on"]


def test_the_edge_between_two_pieces_is_no_boundary():
    shape = multi([SQUARE], [[[1, 0], [2, 0], [2, 1], [1, 1]]])
    assert pointers(inputs(shape, [part("it", {"segment": [[1, 0], [1, 1]]})])) == ["/problem/boundary/0/on"]
    domain = read(shape, [part("it", {"segment": [[0, 0], [2, 0]]})]).domain
    assert lengths(domain)["it"] == 2


def test_selectors_of_a_shape_that_is_refused_are_not_blamed():
    crossing = polygon([[0, 0], [1, 1], [1, 0], [0, 1]])
    found = faults(inputs(crossing, [part("it", {"segment": [[5, 5], [6, 6]]})]))
    assert [pointer for pointer, _ in found] == ["/problem/domain/shape/polygon/outer/2"]


@pytest.mark.parametrize("scale", [1e-100, 1e-3, 1e100])
def test_selection_scales(scale):
    ring = [[0, 0], [2 * scale, 0], [2 * scale, scale], [0, scale]]
    parts = [part("a", {"segment": [[0.5 * scale, 0], [scale, 0]]}), part("b", {"box": [[0, 0], [0, 1e150]]})]
    found = lengths(read(polygon(ring), parts).domain)
    assert found["a"] == pytest.approx(0.5 * scale, rel=1e-14)
    assert found["b"] == pytest.approx(scale, rel=1e-14)


def test_far_from_the_origin_rounding_of_the_coordinates_is_forgiven():
    x, y = 4_500_000.1, 5_700_000.3
    ring = [[x, y], [x + 1, y + 0.37], [x, y + 1]]
    third = [x + 1 / 3, y + 0.37 / 3]
    found = lengths(read(polygon(ring), [part("it", {"segment": [[x, y], third]})]).domain)
    assert found["it"] == pytest.approx(np.hypot(1, 0.37) / 3, rel=1e-8)
