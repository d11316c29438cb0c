"""Domains that are thin, many-toothed, pierced, cracked, or held on very little, each to a thousandth.

Exact values where separation of variables gives them (closed form); elsewhere bounds by comparison.
"""

import math

import mpmath
import pytest
from asking import ALL_ROUND, FREE, JSON, Answer, along, ask, check_contains, enclosure, held, polygon
from plane_shapes import HOLE, SQUARE, TINY_HOLE, Ring, comb, notched, scaled, strip

TOLERANCE = 1e-3

THIN = mpmath.mpf(0.001)
"""The strip's height, the double nearest to a thousandth."""


def around_the_hole(factor: float = 1.0) -> list[JSON]:
    """Only the tiny hole is held."""
    low, high = (HOLE[0] - 0.1, HOLE[1] - 0.1), (HOLE[0] + 0.1, HOLE[1] + 0.1)
    return held({"box": [[factor * x for x in low], [factor * x for x in high]]})


@pytest.mark.slow
def test_thin_strip_held_all_round() -> None:
    answer = ask(polygon(strip(0.001)), ALL_ROUND, TOLERANCE)
    with mpmath.workdps(40):
        exact = 1 / (mpmath.pi * mpmath.sqrt(1 + 1 / THIN**2))
    check_contains(answer, "friedrichs", exact, TOLERANCE)


def test_thin_free_strip() -> None:
    answer = ask(polygon(strip(0.001)), FREE, TOLERANCE)
    check_contains(answer, "poincare", 1 / mpmath.pi, TOLERANCE)


def test_thin_strip_held_on_one_short_side() -> None:
    boundary = held(along((0, 0), (0, 0.001)))
    check_contains(ask(polygon(strip(0.001)), boundary, TOLERANCE), "friedrichs", 2 / mpmath.pi, TOLERANCE)


def test_thin_strip_held_on_one_long_side() -> None:
    boundary = held(along((0, 0), (1, 0)))
    answer = ask(polygon(strip(0.001)), boundary, TOLERANCE)
    check_contains(answer, "friedrichs", 2 * THIN / mpmath.pi, TOLERANCE)


def test_comb_held_all_round() -> None:
    """It contains its bar, 1 x 0.2, and lies in its bounding box, 1 x 1.2 (monotonicity, closed forms)."""
    lower, upper = enclosure(ask(polygon(comb()), ALL_ROUND, TOLERANCE), "friedrichs", TOLERANCE)
    assert upper > 1 / (math.pi * math.sqrt(1 + 1 / 0.2**2))
    assert lower < 1 / (math.pi * math.sqrt(1 + 1 / 1.2**2))


def test_free_comb() -> None:
    """sin(pi y / 2) in one tooth, minus that in another, zero elsewhere, is admitted and has the ratio (pi / 2)^2."""
    lower, _ = enclosure(ask(polygon(comb()), FREE, TOLERANCE), "poincare", TOLERANCE)
    assert lower > 2 / math.pi


def test_comb_held_on_one_edge() -> None:
    """sin(pi y / 2) in one tooth, zero elsewhere, is admitted and has the ratio (pi / 2)^2."""
    boundary = held(along((0, -0.2), (1, -0.2)))
    lower, _ = enclosure(ask(polygon(comb()), boundary, TOLERANCE), "friedrichs", TOLERANCE)
    assert lower > 2 / math.pi


def test_square_with_a_tiny_hole_held_all_round() -> None:
    """Less than the whole square (monotonicity), but not by much."""
    answer = ask(polygon(SQUARE, TINY_HOLE), ALL_ROUND, TOLERANCE)
    lower, upper = enclosure(answer, "friedrichs", TOLERANCE)
    assert lower < 1 / (math.pi * math.sqrt(2))
    assert upper > 0.8 / (math.pi * math.sqrt(2))


def test_square_held_on_a_tiny_hole_only() -> None:
    """The ratio behaves like 2 pi / log(1 / size) over the area: a rough check of the size."""
    answer = ask(polygon(SQUARE, TINY_HOLE), around_the_hole(), TOLERANCE)
    lower, upper = enclosure(answer, "friedrichs", TOLERANCE)
    rough = math.sqrt(math.log(1 / 0.01) / (2 * math.pi))
    assert 0.7 * rough < lower
    assert upper < 1.3 * rough


def test_free_square_with_a_tiny_hole() -> None:
    answer = ask(polygon(SQUARE, TINY_HOLE), FREE, TOLERANCE)
    lower, upper = enclosure(answer, "poincare", TOLERANCE)
    assert 0.99 / math.pi < lower
    assert upper < 1.01 / math.pi


CORNER_CASES = {
    "held all round": (ALL_ROUND, "friedrichs"),
    "free": (FREE, "poincare"),
    "held on one side of the slit": (held(along(*notched(359)[2:4])), "friedrichs"),
    "held on the far side": (held(along((0, 0), (0, 1))), "friedrichs"),
}


@pytest.mark.parametrize("tolerance", [TOLERANCE, pytest.param(1e-6, marks=pytest.mark.slow)])
@pytest.mark.parametrize("name", CORNER_CASES)
def test_corner_of_359_degrees(name: str, tolerance: float) -> None:
    """To a millionth too, where the mesh must go down to a billionth of the size and less: exponents 1/2 and 1/4."""
    boundary, constant = CORNER_CASES[name]
    enclosure(ask(polygon(notched(359)), boundary, tolerance), constant, tolerance)


PENTAGON: Ring = [(0, 0), (2, 0), (3, 1), (1, 2), (0, 1)]


@pytest.mark.parametrize("edge", range(5))
def test_held_on_one_edge_only(edge: int) -> None:
    """More freedom than all round: a larger constant."""
    one = held(along(PENTAGON[edge], PENTAGON[(edge + 1) % 5]))
    some = enclosure(ask(polygon(PENTAGON), one, TOLERANCE), "friedrichs", TOLERANCE)
    every = enclosure(ask(polygon(PENTAGON), ALL_ROUND, TOLERANCE), "friedrichs", TOLERANCE)
    assert every[1] < some[0]


def test_held_in_the_middle_of_an_edge() -> None:
    """Shorter segments leave more freedom; the whole edge has 2/pi (closed form)."""
    segments = [(0.25, 0.75), (0.4, 0.6), (0.49, 0.51), (0.4999, 0.5001)]
    found = [
        enclosure(ask(polygon(SQUARE), held(along((a, 0), (b, 0))), TOLERANCE), "friedrichs", TOLERANCE)
        for a, b in segments
    ]
    before = (2 / math.pi, 2 / math.pi)
    for now in found:
        assert before[1] < now[0]
        before = now


SCALED = {
    "strip, all round": (strip(0.001), None, "all", "friedrichs"),
    "strip, free": (strip(0.001), None, "free", "poincare"),
    "comb, all round": (comb(), None, "all", "friedrichs"),
    "comb, free": (comb(), None, "free", "poincare"),
    "comb, one edge": (comb(), None, "bottom", "friedrichs"),
    "tiny hole, all round": (SQUARE, TINY_HOLE, "all", "friedrichs"),
    "tiny hole, hole only": (SQUARE, TINY_HOLE, "hole", "friedrichs"),
}


def ask_scaled(name: str, factor: float) -> Answer:
    ring, hole, where, _ = SCALED[name]
    holes = [] if hole is None else [scaled(hole, factor)]
    bottom = scaled([(0, -0.2), (1, -0.2)], factor)
    boundary = {
        "all": ALL_ROUND,
        "free": FREE,
        "bottom": held(along(*bottom)),
        "hole": around_the_hole(factor),
    }[where]
    return ask(polygon(scaled(ring, factor), *holes), boundary, TOLERANCE)


COSTLY = "strip, all round"
"""Takes most of a minute on a quiet machine, and is limited to one: run with -m slow."""


@pytest.mark.parametrize(
    "name", [pytest.param(name, marks=pytest.mark.slow) if name == COSTLY else name for name in SCALED]
)
def test_millimetres_and_kilometres(name: str) -> None:
    """Enclosures of the same shape, given in three units, intersect once scaled back; each has the width asked for."""
    constant = SCALED[name][3]
    metres = enclosure(ask_scaled(name, 1.0), constant, TOLERANCE)
    for factor in (1000.0, 0.001):
        lower, upper = enclosure(ask_scaled(name, factor), constant, TOLERANCE)
        # Coordinates are rounded once when scaled, and so is this quotient: a few units in the last place.
        slack = 1e-13
        assert lower / factor * (1 - slack) <= metres[1]
        assert metres[0] <= upper / factor * (1 + slack)


@pytest.mark.parametrize("name", ["comb, one edge", "tiny hole, hole only"])
@pytest.mark.parametrize("exponent", [-20, 10])
def test_scaling_by_a_power_of_two_scales_every_bit(name: str, exponent: int) -> None:
    constant = SCALED[name][3]
    plain = ask_scaled(name, 1.0).constant(constant)
    there = ask_scaled(name, 2.0**exponent).constant(constant)
    assert there["lower"] == 2.0**exponent * plain["lower"]
    assert there["upper"] == 2.0**exponent * plain["upper"]
