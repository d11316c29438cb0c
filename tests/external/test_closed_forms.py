"""Straight-sided plane domains whose spectrum is known in closed form, each to a millionth of the constant.

Sources: separation of variables for rectangles and the right isosceles triangle (Courant and Hilbert; Kuttler and
Sigillito, SIAM Review 26 (1984); Grebenkov and Nguyen, SIAM Review 55 (2013)); Lamé 1833 and McCartin, SIAM Review 45
(2003), for the equilateral triangle.
"""

from typing import Any

import mpmath
import pytest
from asking import ALL_ROUND, FREE, along, ask, check_contains, held, polygon

TOLERANCE = 1e-6

mpmath.mp.dps = 40
PI = mpmath.pi

SQUARE = [(0, 0), (1, 0), (1, 1), (0, 1)]

ONE_SIDE = held(along((0, 0), (1, 0)))
OPPOSITE = held(along((0, 0), (1, 0)), along((0, 1), (1, 1)))
ADJACENT = held(along((0, 0), (1, 0), (1, 1)))
THREE = held(along((0, 1), (0, 0), (1, 0), (1, 1)))

SQUARE_ROWS = {
    "all sides": (ALL_ROUND, 2 * PI**2),
    "one side": (ONE_SIDE, PI**2 / 4),
    "two opposite sides": (OPPOSITE, PI**2),
    "two adjacent sides": (ADJACENT, PI**2 / 2),
    "three sides": (THREE, 5 * PI**2 / 4),
}


@pytest.mark.parametrize("name", SQUARE_ROWS)
def test_unit_square_held_on_some_sides(name: str) -> None:
    boundary, ratio = SQUARE_ROWS[name]
    answer = ask(polygon(SQUARE), boundary, TOLERANCE)
    check_contains(answer, "friedrichs", 1 / mpmath.sqrt(ratio), TOLERANCE)


# Sides that doubles hold exactly, so that the closed form is that of the very domain given.
RECTANGLES = [(1.0, 1.0), (3.0, 1.0), (0.625, 2.5), (1.0, 16.0), (1.4375, 1.0), (100.0, 1.0)]


@pytest.mark.parametrize(("a", "b"), RECTANGLES)
def test_rectangle_held_all_round(a: float, b: float) -> None:
    """Held on both long sides, 100 by 1 has a dense spectrum: counting alone proves, to a thousandth in a minute."""
    shape = {"rectangle": {"corner": [-0.25, 0.5], "size": [a, b]}}
    ratio = PI**2 * (1 / mpmath.mpf(a) ** 2 + 1 / mpmath.mpf(b) ** 2)
    tolerance = TOLERANCE if max(a, b) < 50 * min(a, b) else 1e-3
    check_contains(ask(shape, ALL_ROUND, tolerance), "friedrichs", 1 / mpmath.sqrt(ratio), tolerance)


@pytest.mark.parametrize(("a", "b"), RECTANGLES)
def test_free_rectangle(a: float, b: float) -> None:
    shape = {"rectangle": {"corner": [-0.25, 0.5], "size": [a, b]}}
    check_contains(ask(shape, FREE, TOLERANCE), "poincare", max(a, b) / PI, TOLERANCE)


def equilateral() -> list[tuple[float, float]]:
    """Side 1; the height is off by a rounding, far less than the enclosures tell apart."""
    return [(0.0, 0.0), (1.0, 0.0), (0.5, float(mpmath.sqrt(3) / 2))]


TRIANGLES: dict[str, tuple[Any, Any, Any]] = {
    "equilateral": (equilateral(), 16 * PI**2 / 3, 16 * PI**2 / 9),
    "right isosceles": ([(0, 0), (1, 0), (0, 1)], 5 * PI**2, PI**2),
}


@pytest.mark.parametrize("name", TRIANGLES)
def test_triangle_held_all_round(name: str) -> None:
    ring, ratio, _ = TRIANGLES[name]
    answer = ask(polygon(ring), ALL_ROUND, TOLERANCE)
    check_contains(answer, "friedrichs", 1 / mpmath.sqrt(ratio), TOLERANCE)


@pytest.mark.parametrize("name", TRIANGLES)
def test_free_triangle(name: str) -> None:
    ring, _, ratio = TRIANGLES[name]
    answer = ask(polygon(ring), FREE, TOLERANCE)
    check_contains(answer, "poincare", 1 / mpmath.sqrt(ratio), TOLERANCE)


def test_right_isosceles_triangle_held_on_its_legs() -> None:
    """Half of the square held all round: by reflection its lowest mode is sin(pi x) sin(pi y)."""
    boundary = held(along((0, 1), (0, 0), (1, 0)))
    answer = ask(polygon([(0, 0), (1, 0), (0, 1)]), boundary, TOLERANCE)
    check_contains(answer, "friedrichs", 1 / mpmath.sqrt(2 * PI**2), TOLERANCE)


def test_vertices_at_straight_angles_change_nothing() -> None:
    """Extra vertices on the sides of a rectangle: the same domain."""
    ring = [(0, 0), (0.5, 0), (0.75, 0), (2, 0), (2, 0.25), (2, 1), (1, 1), (0, 1), (0, 0.125)]
    ratio = PI**2 * (mpmath.mpf(1) / 4 + 1)
    check_contains(ask(polygon(ring), ALL_ROUND, TOLERANCE), "friedrichs", 1 / mpmath.sqrt(ratio), TOLERANCE)


@pytest.mark.parametrize("tolerance", [1e-8, 1e-9])
@pytest.mark.parametrize("name", ["all sides", "three sides"])
def test_smooth_modes_are_proved_to_nine_digits(name: str, tolerance: float) -> None:
    boundary, ratio = SQUARE_ROWS[name]
    answer = ask(polygon(SQUARE), boundary, tolerance)
    check_contains(answer, "friedrichs", 1 / mpmath.sqrt(ratio), tolerance)
