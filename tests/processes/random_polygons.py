"""Random simple polygons with exact coordinates, and random parts of their boundaries (all invented)."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from hypothesis import assume
from hypothesis import strategies as st
from shapely import MultiPoint, Polygon, box
from shapely.ops import unary_union

Point = tuple[float, float]
Ring = list[Point]

GRID = 64
"""Coordinates are multiples of 1 / GRID: exact in doubles, and so are their halves and sums."""


@dataclass(frozen=True)
class Shape:
    """A polygon with holes, and the numbers (ring, edge) of the edges that are held; at least one."""

    rings: tuple[Ring, ...]
    held: tuple[tuple[int, int], ...]

    @property
    def polygon(self) -> Polygon:
        """As another library sees it."""
        return Polygon(self.rings[0], self.rings[1:])

    def edge(self, ring: int, number: int) -> tuple[Point, Point]:
        """Both ends of an edge."""
        points = self.rings[ring]
        return points[number], points[(number + 1) % len(points)]

    def boundary(self) -> list[dict[str, Any]]:
        """The held edges as parts of a problem."""
        return [
            {
                "name": f"{ring}.{edge}",
                "on": {"segment": [list(point) for point in self.edge(ring, edge)]},
                "condition": "dirichlet",
            }
            for ring, edge in self.held
        ]


def edges_of(rings: Sequence[Ring]) -> list[tuple[int, int]]:
    """All edges as (ring, edge)."""
    return [(r, e) for r, ring in enumerate(rings) for e in range(len(ring))]


def some_of(rings: Sequence[Ring]) -> st.SearchStrategy[tuple[tuple[int, int], ...]]:
    """A nonempty set of edges."""
    edges = edges_of(rings)
    chosen = st.lists(st.sampled_from(edges), min_size=1, max_size=len(edges), unique=True)
    return chosen.map(lambda found: tuple(sorted(found)))


@st.composite
def stars(draw: st.DrawFn) -> Ring:
    """Star-shaped about the origin: one vertex in each of n sectors, radii between 1/4 and 2, counter-clockwise."""
    count = draw(st.integers(5, 11))
    shifts = draw(st.lists(st.integers(0, 60), min_size=count, max_size=count))
    radii = draw(st.lists(st.integers(25, 200), min_size=count, max_size=count))
    angles = 2 * np.pi * (np.arange(count) + np.array(shifts) / 100) / count
    reach = np.array(radii) / 100
    points = np.rint(GRID * np.column_stack([reach * np.cos(angles), reach * np.sin(angles)])) / GRID
    return [(float(x), float(y)) for x, y in points]


@st.composite
def blocks(draw: st.DrawFn) -> tuple[Ring, ...]:
    """Connected unit squares of a grid: right angles outward and inward, and holes; nothing touches in a point."""
    count = draw(st.integers(2, 9))
    cells = {(0, 0)}
    for _ in range(count):
        x, y = draw(st.sampled_from(sorted(cells)))
        dx, dy = draw(st.sampled_from([(1, 0), (0, 1), (-1, 0), (0, -1)]))
        cells.add((x + dx, y + dy))
    shape = unary_union([box(x, y, x + 1, y + 1) for x, y in sorted(cells)]).normalize()
    corners = [point for ring in (shape.exterior, *shape.interiors) for point in ring.coords[:-1]]
    assume(len(set(corners)) == len(corners))
    rings = [Polygon(ring).simplify(0) for ring in (shape.exterior, *shape.interiors)]
    return tuple([(float(x), float(y)) for x, y in ring.exterior.coords[:-1]] for ring in rings)


@st.composite
def shapes(draw: st.DrawFn) -> Shape:
    """Either kind with some edges held."""
    rings = draw(st.one_of(stars().map(lambda ring: (ring,)), blocks()))
    return Shape(rings, draw(some_of(rings)))


@st.composite
def convex(draw: st.DrawFn) -> Ring:
    """The hull of a few grid points, no thinner than a hundredth of its size."""
    number = st.integers(-2 * GRID, 2 * GRID).map(lambda n: n / GRID)
    hulls = st.lists(st.tuples(number, number), min_size=3, max_size=8, unique=True).map(
        lambda points: MultiPoint(points).convex_hull
    )
    hull = draw(hulls.filter(lambda found: found.geom_type == "Polygon" and found.area > 0.01 * found.length**2 / 16))
    return [(float(x), float(y)) for x, y in hull.exterior.coords[:-1]]
