"""Large and hostile documents: read, or refused with a stated limit, within seconds of processor time."""

import time

import numpy as np
import pytest
from problem_documents import KNOWN, area, faults, inputs, lengths, multi, part, polygon

from service.problem.request import read_request

MOST = 100_000

SECONDS = 10
"""Measured: 0.5 to 3 s on a 2-core machine; an edge-by-edge comparison would take minutes."""


def star(count, inner):
    """A star with alternating radii 1 and ``inner``."""
    angles = np.linspace(0, 2 * np.pi, count, endpoint=False)
    radii = np.where(np.arange(count) % 2, inner, 1.0)
    return np.column_stack([radii * np.cos(angles), radii * np.sin(angles)])


def blob(count):
    """A smooth curve with twenty waves."""
    angles = np.linspace(0, 2 * np.pi, count, endpoint=False)
    radii = 1 + 0.3 * np.sin(20 * angles)
    return np.column_stack([radii * np.cos(angles), radii * np.sin(angles)])


def comb(teeth, turn):
    """A comb with long teeth, turned by an angle."""
    tooth = np.array([[0, 1], [0.5, 1], [0.5, 0], [1, 0]])
    upper = (tooth + np.column_stack([np.arange(teeth), np.zeros(teeth)])[:, None]).reshape(-1, 2)
    ring = np.vstack([upper[:-1] / [teeth, 1], [[1, -1], [0, -1]]])
    return ring @ np.array([[np.cos(turn), np.sin(turn)], [-np.sin(turn), np.cos(turn)]])


def squares(count, side, shift=0.0):
    """A chess board of squares with distance 1; every second row shifted."""
    columns = int(count**0.5)
    corners = np.array([[x, y] for x in range(columns) for y in range(columns)], dtype=float)
    corners[:, 0] += shift * (corners[:, 1] % 2)
    return [(corner + side * np.array([[0, 0], [1, 0], [1, 1], [0, 1]])).tolist() for corner in corners]


def timed(document):
    before = time.process_time()
    found = faults(document)
    assert time.process_time() - before < SECONDS
    return found


def test_the_largest_polygon_with_selectors_is_read():
    ring = blob(MOST)
    parts = [
        part("right", {"box": [[0, -2], [2, 2]]}),
        part("traced", {"polyline": ring[30_000:60_000].tolist()}),
        part("rest", "remainder", "neumann"),
    ]
    before = time.process_time()
    domain = read_request(inputs(polygon(ring.tolist()), parts), KNOWN).domain
    assert time.process_time() - before < SECONDS
    steps = np.hypot(*(np.roll(ring, -1, axis=0) - ring).T)
    assert lengths(domain)["traced"] == pytest.approx(steps[30_000:59_999].sum(), rel=1e-12)
    assert sum(lengths(domain).values()) == pytest.approx(steps.sum(), rel=1e-12)
    assert domain.points[:5].tolist() == ring[:5].tolist()


def test_the_largest_comb_is_read():
    ring = comb(24_999, 0)
    assert timed(inputs(polygon(ring.tolist()))) == []


@pytest.mark.slow
def test_a_union_of_many_squares_is_one_square():
    board = squares(24_000, 1)
    before = time.process_time()
    domain = read_request(inputs(multi(*([ring] for ring in board))), KNOWN).domain
    assert time.process_time() - before < SECONDS
    side = int(24_000**0.5)
    assert area(domain) == side**2
    assert (domain.components, len(domain.points)) == (1, 4 * side)


def test_a_wall_of_shifted_bricks_is_connected():
    domain = read_request(inputs(multi(*([ring] for ring in squares(400, 1, 0.5)))), KNOWN).domain
    assert (area(domain), domain.components) == (400, 1)


@pytest.mark.slow
def test_many_holes_are_read():
    holes = squares(24_000, 0.5)
    side = int(24_000**0.5)
    document = inputs(polygon([[-1, -1], [side, -1], [side, side], [-1, side]], *holes))
    before = time.process_time()
    domain = read_request(document, KNOWN).domain
    assert time.process_time() - before < SECONDS
    assert area(domain) == (side + 1) ** 2 - side**2 / 4
    assert domain.loops.max() == side**2


@pytest.mark.slow
def test_too_many_vertices_are_refused():
    assert [pointer for pointer, _ in timed(inputs(polygon(blob(MOST + 2).tolist())))] == [
        "/problem/domain/shape/polygon/outer"
    ]
    half = blob(MOST // 2 + 1)
    ((pointer, detail),) = timed(inputs(multi([half.tolist()], [(half + 5).tolist()])))
    assert pointer == "/problem/domain/shape"
    assert "100000" in detail


@pytest.mark.parametrize("ring", [star(MOST, 0.01), comb(24_999, 0.7)], ids=["star", "slanted comb"])
def test_edges_that_all_lie_across_each_other_are_refused_with_the_limit(ring):
    ((pointer, detail),) = timed(inputs(polygon(ring.tolist())))
    assert pointer == "/problem/domain/shape/polygon"
    assert "4000000 pairs" in detail


def test_a_star_with_thousands_of_spikes_is_read():
    assert timed(inputs(polygon(star(4000, 0.1).tolist()))) == []


def test_a_random_tangle_is_refused_by_its_first_crossings():
    found = timed(inputs(polygon(np.random.default_rng(1).random((MOST, 2)).tolist())))
    assert len(found) == 10
    assert all("crosses" in detail for _, detail in found)


@pytest.mark.slow
def test_walking_to_and_fro_is_refused():
    line = np.tile([[0, 0], [3, 1], [6, 2], [9, 3]], (MOST // 4, 1)).astype(float)
    line[-1] = [0, 5]
    assert timed(inputs(polygon(line.tolist())))


@pytest.mark.slow
def test_holes_nested_in_each_other_s_corners_are_refused_with_the_limit():
    corner = np.array([[0, 0], [1, 0], [1, 1e-6], [1e-6, 1e-6], [1e-6, 1], [0, 1]])
    holes = [(corner + 3e-5 * index).tolist() for index in range(16_000)]
    ((_, detail),) = timed(inputs(polygon([[-1, -1], [2, -1], [2, 2], [-1, 2]], *holes)))
    assert "4000000 pairs" in detail


@pytest.mark.slow
def test_a_piece_around_many_others_is_refused():
    board = [[ring] for ring in squares(20_000, 0.5)]
    found = timed(inputs(multi([[[-1, -1], [200, -1], [200, 200], [-1, 200]]], *board)))
    assert [pointer for pointer, _ in found] == ["/problem/domain/shape/coordinates/0/0"]


@pytest.mark.slow
def test_selectors_that_come_near_too_much_are_refused_with_the_limit():
    parts = [part(f"box {index}", {"box": [[-2, -2], [2, 2]]}) for index in range(1000)]
    found = timed(inputs(polygon(blob(MOST).tolist()), parts))
    assert any("2000000 places" in detail for _, detail in found)
    tangle = np.random.default_rng(1).random((MOST, 2)).tolist()
    found = timed(inputs(polygon(blob(MOST).tolist()), [part("tangle", {"polyline": tangle})]))
    assert [pointer for pointer, _ in found] == ["/problem/boundary/0/on"]


@pytest.mark.slow
def test_many_parts_are_laid_out():
    ring = blob(MOST // 10)
    parts = [part(f"{index}", {"segment": ring[[10 * index, 10 * index + 1]].tolist()}) for index in range(999)]
    assert timed(inputs(polygon(ring.tolist()), [*parts, part("rest", "remainder")])) == []


@pytest.mark.slow
def test_selectors_with_too_many_points_are_refused():
    ring = blob(MOST)
    parts = [part(name, {"polyline": ring[:60_000].tolist()}) for name in ("a", "b")]
    assert [pointer for pointer, _ in timed(inputs(polygon(ring.tolist()), parts))] == ["/problem/boundary"]
