"""What a shape becomes: oriented simple loops, areas, pieces. Areas are elementary geometry."""

import numpy as np
import pytest
from problem_documents import SQUARE, area, multi, polygon, read


def square(x, y, side):
    return [[x, y], [x + side, y], [x + side, y + side], [x, y + side]]


def loops(domain):
    """Signed areas of the loops, each checked to be closed and followed edge by edge."""
    areas = []
    for number in range(domain.loops.max() + 1):
        edges = domain.edges[domain.loops == number]
        assert (edges[:, 1] == np.roll(edges[:, 0], -1)).all()
        assert len(set(edges[:, 0].tolist())) == len(edges)
        x, y = domain.points[edges[:, 0]].T
        areas.append(float((x * np.roll(y, -1) - y * np.roll(x, -1)).sum() / 2))
    return areas


ACCEPTED = [
    # shape, signed areas of the loops, number of pieces
    ({"rectangle": {"corner": [1, 2], "size": [3, 0.5]}}, [1.5], 1),
    (polygon(SQUARE), [1], 1),
    (polygon(SQUARE[::-1]), [1], 1),
    (polygon(SQUARE, square(0.25, 0.25, 0.5)), [1, -0.25], 1),
    (polygon(SQUARE[::-1], square(0.25, 0.25, 0.5)[::-1]), [1, -0.25], 1),
    (polygon([[0, 0], [0.5, 0], [1, 0], [1, 1], [0, 1]]), [1], 1),
    # holes that touch: in a vertex, in the middle of an edge, each other
    (polygon(SQUARE, [[0, 0], [0.5, 0.25], [0.25, 0.5]]), [1, -3 / 32], 1),
    (polygon(SQUARE, [[0.5, 0], [0.75, 0.5], [0.25, 0.5]]), [1, -0.125], 1),
    (polygon(SQUARE, square(0.25, 0.25, 0.25), square(0.5, 0.5, 0.25)), [1, -1 / 16, -1 / 16], 1),
    # a hole from side to side cuts the square in two
    (polygon(SQUARE, [[0.5, 0], [0.75, 0.5], [0.5, 1], [0.25, 0.5]]), [3 / 8, 3 / 8], 2),
    # holes in a ring of touching corners enclose a second piece
    (
        polygon(
            square(0, 0, 8),
            [[2, 2], [6, 2], [4, 1]],
            [[6, 2], [6, 6], [7, 4]],
            [[6, 6], [2, 6], [4, 7]],
            [[2, 6], [2, 2], [1, 4]],
        ),
        [64, -24, 16],
        2,
    ),
    # pieces: with a common edge, part of one, around a hole, in a point, apart
    (multi([SQUARE], [square(1, 0, 1)]), [2], 1),
    (multi([SQUARE], [square(1, 0.25, 0.5)]), [1.25], 1),
    (multi([SQUARE], [square(1, 0.25, 0.5)], [square(1.5, 0, 1)]), [2.25], 1),
    (multi([SQUARE, square(0.25, 0.25, 0.5)], [square(0.25, 0.25, 0.5)]), [1], 1),
    (multi([SQUARE, square(0.25, 0.25, 0.5)], [square(0.375, 0.375, 0.25)]), [1, -0.25, 1 / 16], 2),
    (multi([SQUARE], [square(1, 1, 1)]), [1, 1], 2),
    (multi([SQUARE], [square(3, 3, 1)]), [1, 1], 2),
    (
        multi([[[0, 0], [3, 0], [3, 1], [0, 1]]], [square(0, 1, 1)], [square(2, 1, 1)], [square(1, 2, 1)]),
        [3 + 1 + 1, 1],
        2,
    ),
    (
        multi(
            [[[0, 0], [3, 0], [3, 1], [0, 1]]],
            [[[0, 2], [3, 2], [3, 3], [0, 3]]],
            [square(0, 1, 1)],
            [square(2, 1, 1)],
        ),
        [9, -1],
        1,
    ),
]


@pytest.mark.parametrize(("shape", "areas", "components"), ACCEPTED)
def test_a_shape_becomes_oriented_simple_loops(shape, areas, components):
    domain = read(shape).domain
    assert loops(domain) == pytest.approx(areas, abs=1e-15)
    assert domain.components == components
    assert area(domain) == pytest.approx(sum(areas), rel=1e-15)


RFC_7946_POLYGON = [[100.0, 0.0], [101.0, 0.0], [101.0, 1.0], [100.0, 1.0], [100.0, 0.0]]
RFC_7946_HOLE = [[100.8, 0.8], [100.8, 0.2], [100.2, 0.2], [100.2, 0.8], [100.8, 0.8]]
RFC_7946_OTHER = [[102.0, 2.0], [103.0, 2.0], [103.0, 3.0], [102.0, 3.0], [102.0, 2.0]]


@pytest.mark.parametrize(
    ("kind", "coordinates", "areas"),
    [
        ("Polygon", [RFC_7946_POLYGON], [1]),  # RFC 7946, appendix A.3, no holes
        ("Polygon", [RFC_7946_POLYGON, RFC_7946_HOLE], [1, -0.36]),  # appendix A.3, with holes
        ("MultiPolygon", [[RFC_7946_OTHER], [RFC_7946_POLYGON, RFC_7946_HOLE[::-1]]], [1, 1, -0.36]),  # A.6
    ],
)
def test_the_examples_of_rfc_7946_are_read(kind, coordinates, areas):
    domain = read({"type": kind, "coordinates": coordinates}).domain
    assert loops(domain) == pytest.approx(areas, rel=1e-9)
    assert domain.components == (2 if kind == "MultiPolygon" else 1)


def test_touching_loops_share_the_vertex():
    domain = read(polygon(SQUARE, [[0.5, 0], [0.75, 0.5], [0.25, 0.5]])).domain
    (shared,) = np.flatnonzero(np.bincount(domain.edges[:, 0]) > 1)
    assert domain.points[shared].tolist() == [0.5, 0]
    assert len(np.unique(domain.points, axis=0)) == len(domain.points) == 7


def test_loops_begin_with_the_first_vertex_of_the_document():
    domain = read(polygon([[3, 0], [3, 3], [0, 3], [0, 0]][::-1], [[1, 1], [2, 1], [1, 2]])).domain
    starts = [domain.points[domain.edges[domain.loops == number][0, 0]].tolist() for number in (0, 1)]
    assert starts == [[0, 0], [1, 1]]


def test_vertices_at_straight_angles_stay():
    ring = [[0, 0], [0.25, 0], [0.5, 0], [1, 0], [1, 1], [0, 1]]
    assert read(polygon(ring)).domain.points.tolist() == ring


def test_vertices_where_two_pieces_meet_stay():
    domain = read(multi([SQUARE], [square(1, 0, 1)])).domain
    assert sorted(domain.points.tolist()) == [[0, 0], [0, 1], [1, 0], [1, 1], [2, 0], [2, 1]]


@pytest.mark.parametrize("scale", [1e-149, 1e-30, 1e-3, 1e3, 1e30, 1e149])
@pytest.mark.parametrize("shape", [polygon, multi])
def test_the_scale_does_not_matter(scale, shape):
    ring = [[0, 0], [7 * scale, scale], [5 * scale, 4 * scale], [3 * scale, 2 * scale]]
    domain = (read(polygon(ring)) if shape is polygon else read(multi([ring]))).domain
    assert domain.points.tolist() == ring
    assert domain.components == 1


@pytest.mark.parametrize(
    "ring",
    [
        [[0, 0], [1, 0], [1, 0.001], [0, 0.001]],  # a thin strip
        [[0, 0], [1, 0], [1, 1], [0, 1], [0.999, 0.5]],  # a deep notch
        [[-1, -1], [1, -1], [1, -0.008726], [0, 0], [1, 0.008726], [1, 1], [-1, 1]],  # a corner of 359°
        [[1e6, 1e6], [1e6 + 0.01, 1e6], [1e6 + 0.01, 1e6 + 0.01]],  # small, far from the origin
    ],
)
def test_hard_shapes_are_accepted(ring):
    assert read(polygon(ring)).domain.points.tolist() == ring
