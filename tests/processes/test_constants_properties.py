"""What must hold for every polygon and every choice of held edges, on random ones."""

from collections.abc import Callable
from itertools import combinations
from typing import Any

import numpy as np
import pytest
from asking import ALL_ROUND, FREE, SECONDS, Answer, ask, enclosure, polygon
from hypothesis import given, settings
from hypothesis import strategies as st
from random_polygons import Point, Ring, Shape, convex, edges_of, shapes, stars
from scipy.special import jn_zeros, jnp_zeros

COARSE, FINE = 3e-2, 1e-3

SLACK = 1e-12
"""Relative; for areas, diameters and lengths that this file computes in doubles."""

FEW, MANY = 8, 150

Interval = tuple[float, float]


def interval(shape: Shape, tolerance: float = FINE) -> Interval:
    return enclosure(ask(polygon(*shape.rings), shape.boundary(), tolerance), "friedrichs", tolerance)


def free_interval(rings: tuple[Ring, ...], tolerance: float = FINE) -> Interval:
    return enclosure(ask(polygon(*rings), FREE, tolerance), "poincare", tolerance)


def held_interval(rings: tuple[Ring, ...], tolerance: float = FINE) -> Interval:
    return enclosure(ask(polygon(*rings), ALL_ROUND, tolerance), "friedrichs", tolerance)


def check_intersect(first: Interval, second: Interval, slack: float = 0.0) -> None:
    assert first[0] * (1 - slack) <= second[1]
    assert second[0] * (1 - slack) <= first[1]


def diameter(ring: Ring) -> float:
    return max(float(np.hypot(p[0] - q[0], p[1] - q[1])) for p, q in combinations(ring, 2))


def two_tolerances_intersect(shape: Shape) -> None:
    check_intersect(interval(shape, COARSE), interval(shape))
    check_intersect(free_interval(shape.rings, COARSE), free_interval(shape.rings))


def holding_less_makes_the_constant_larger(shape: Shape) -> None:
    """Fewer held edges, more functions (monotonicity of the minimum)."""
    every = Shape(shape.rings, tuple(edges_of(shape.rings)))
    assert interval(every)[0] <= interval(shape)[1]


def isoperimetric_inequalities(shape: Shape) -> None:
    """Faber 1923, Krahn 1925: zero all round, lambda >= pi j01^2 / area. Szegő 1954, Weinberger 1956: free,
    mu <= pi j'11^2 / area. (Memory for the second.)"""
    radius = np.sqrt(shape.polygon.area / np.pi)
    assert held_interval(shape.rings)[0] <= radius / float(jn_zeros(0, 1)[0]) * (1 + SLACK)
    assert free_interval(shape.rings)[1] >= radius / float(jnp_zeros(1, 1)[0]) * (1 - SLACK)


def payne_weinberger(ring: Ring) -> None:
    """Convex domains: C <= diameter / pi (Payne and Weinberger 1960; Bebendorf 2003)."""
    assert free_interval((ring,))[0] <= diameter(ring) / np.pi * (1 + SLACK)


@st.composite
def enlarged(draw: st.DrawFn) -> tuple[Shape, Shape]:
    """A star with some held edges, and the same with one held edge replaced by two further out, held as well."""
    ring = draw(stars())
    edge = draw(st.integers(0, len(ring) - 1))
    others = draw(st.sets(st.integers(0, len(ring) - 1)))
    (x0, y0), (x1, y1) = ring[edge], ring[(edge + 1) % len(ring)]
    out = 1 + draw(st.integers(1, 64)) / 64
    middle = (out * (x0 + x1) / 2, out * (y0 + y1) / 2)
    small = Shape((ring,), tuple((0, e) for e in sorted(others | {edge})))
    large_ring = [*ring[: edge + 1], middle, *ring[edge + 1 :]]
    held = {e + (e > edge) for e in others | {edge}} | {edge + 1}
    return small, Shape((large_ring,), tuple((0, e) for e in sorted(held)))


def enlarging_across_held_edges_makes_the_constant_larger(pair: tuple[Shape, Shape]) -> None:
    """Functions extend by zero into what was added."""
    small, large = pair
    assert interval(small)[0] <= interval(large)[1]


def moved_and_scaled(shape: Shape, change: Callable[[Point], Point], factor: float) -> None:
    """A similarity whose coordinates are exact or off by one rounding scales the constant by its factor."""
    image = Shape(tuple([change(point) for point in ring] for ring in shape.rings), shape.held)
    plain, there = interval(shape), interval(image)
    check_intersect(plain, (there[0] / factor, there[1] / factor), SLACK)


SIMILARITIES: dict[str, tuple[Callable[[Point], Point], float]] = {
    "rotation by a right angle": (lambda p: (-p[1], p[0]), 1.0),
    "mirror image": (lambda p: (-p[0], p[1]), 1.0),
    "mirror image in the diagonal": (lambda p: (p[1], p[0]), 1.0),
    "shift": (lambda p: (p[0] + 1024.0, p[1] - 33.5), 1.0),
    "three times as large": (lambda p: (3 * p[0], 3 * p[1]), 3.0),
    "a seventh": (lambda p: (p[0] / 7, p[1] / 7), 1 / 7),
}

PROPERTIES: dict[str, tuple[st.SearchStrategy[Any], Callable[[Any], None]]] = {
    "enclosures at two tolerances intersect": (shapes(), two_tolerances_intersect),
    "holding less makes the constant larger": (shapes(), holding_less_makes_the_constant_larger),
    "isoperimetric inequalities": (shapes(), isoperimetric_inequalities),
    "Payne and Weinberger": (convex(), payne_weinberger),
    "enlarging across held edges": (enlarged(), enlarging_across_held_edges_makes_the_constant_larger),
}


def check(strategy: st.SearchStrategy[Any], statement: Callable[[Any], None], examples: int) -> None:
    """Runs a statement on random examples, the same ones every time."""

    @settings(max_examples=examples)
    @given(strategy)
    def holds(example: Any) -> None:
        statement(example)

    holds()


@pytest.mark.parametrize("name", PROPERTIES)
def test_property_of_random_polygons(name: str) -> None:
    check(*PROPERTIES[name], FEW)


@pytest.mark.parametrize("name", SIMILARITIES)
def test_similarity_of_random_polygons(name: str) -> None:
    change, factor = SIMILARITIES[name]
    check(shapes(), lambda shape: moved_and_scaled(shape, change, factor), FEW // 2)


@pytest.mark.slow
@pytest.mark.parametrize("name", PROPERTIES)
def test_property_of_many_random_polygons(name: str) -> None:
    check(*PROPERTIES[name], MANY)


@pytest.mark.slow
@pytest.mark.parametrize("name", SIMILARITIES)
def test_similarity_of_many_random_polygons(name: str) -> None:
    change, factor = SIMILARITIES[name]
    check(shapes(), lambda shape: moved_and_scaled(shape, change, factor), MANY // 3)


def ends(answer: Answer) -> dict[str, tuple[float, float]]:
    return {name: (value["lower"], value["upper"]) for name, value in answer.result["constants"].items()}


@settings(max_examples=5)
@given(shapes())
def test_the_same_request_gives_the_same_bits(shape: Shape) -> None:
    both = ["friedrichs", "poincare"]
    first, second = (ask(polygon(*shape.rings), shape.boundary(), FINE, both, SECONDS) for _ in range(2))
    assert ends(first) == ends(second)
    widths = [[step["widths"] for step in answer.result["history"]] for answer in (first, second)]
    assert widths[0] == widths[1]
