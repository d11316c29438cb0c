"""Rings of points of domains that are hard to mesh, to resolve, or to bound."""

import numpy as np
from shapely import LineString, Polygon, box
from shapely.ops import unary_union

Ring = list[tuple[float, float]]

SQUARE: Ring = [(0, 0), (1, 0), (1, 1), (0, 1)]

TEETH = 10

HOLE = (0.7, 0.6)
"""Lower left corner of the tiny hole."""


def square_hole(x: float, y: float, side: float) -> Ring:
    """A square with lower left corner (x, y)."""
    return [(x, y), (x + side, y), (x + side, y + side), (x, y + side)]


TINY_HOLE = square_hole(*HOLE, 0.01)


def strip(height: float) -> Ring:
    """The rectangle 1 x height."""
    return [(0, 0), (1, 0), (1, height), (0, height)]


def comb(teeth: int = TEETH, width: float = 0.05) -> Ring:
    """A bar 1 x 0.2 with teeth of height 1 on top."""
    ring: Ring = [(0.0, -0.2), (1.0, -0.2), (1.0, 0.0)]
    for tooth in reversed(range(teeth)):
        middle = (tooth + 0.5) / teeth
        left, right = middle - width / 2, middle + width / 2
        ring += [(right, 0.0), (right, 1.0), (left, 1.0), (left, 0.0)]
    return [*ring, (0.0, 0.0)]


def notched(degrees: float) -> Ring:
    """The unit square with a wedge cut out to its centre, vertex 3, that leaves an interior angle there."""
    half = 0.5 * float(np.tan(np.radians((360 - degrees) / 2)))
    return [(0, 0), (1, 0), (1, 0.5 - half), (0.5, 0.5), (1, 0.5 + half), (1, 1), (0, 1)]


def shoreline(count: int) -> Ring:
    """A wavy ring of ``count`` edges (invented)."""
    angle = 2 * np.pi * np.arange(count) / count
    radius = 1 + 0.2 * np.cos(3 * angle) + 0.01 * np.random.default_rng(1).standard_normal(count)
    return [(float(x), float(y)) for x, y in zip(radius * np.cos(angle), radius * np.sin(angle), strict=True)]


def spiral(turns: int, width: float) -> Ring:
    """A corridor wound in a square spiral."""
    steps = np.array([(1, 0), (0, 1), (-1, 0), (0, -1)])
    place = np.zeros(2)
    line = [place]
    for corner in range(4 * turns):
        place = place + steps[corner % 4] * (1 + corner // 2)
        line.append(place)
    return outline(LineString(line).buffer(width / 2, cap_style="flat", join_style="mitre"))


def dumbbell(channel: float) -> Ring:
    """Two unit squares joined by a channel of length 1."""
    low, high = 0.5 - channel / 2, 0.5 + channel / 2
    right = [(2, low), (2, 0), (3, 0), (3, 1), (2, 1), (2, high)]
    return [(0, 0), (1, 0), (1, low), *right, (1, high), (1, 1), (0, 1)]


def rooms(count: int, door: float = 0.1, wall: float = 0.05) -> list[Ring]:
    """Outline and holes of count x count rooms with doors between neighbours."""
    open_space = []
    for i, j in np.ndindex(count, count):
        open_space.append(box(i + wall / 2, j + wall / 2, i + 1 - wall / 2, j + 1 - wall / 2))
        if i + 1 < count:
            open_space.append(box(i + 1 - wall, j + 0.5 - door / 2, i + 1 + wall, j + 0.5 + door / 2))
        if j + 1 < count:
            open_space.append(box(i + 0.5 - door / 2, j + 1 - wall, i + 0.5 + door / 2, j + 1 + wall))
    plan = unary_union(open_space)
    return [outline(plan), *(outline(Polygon(hole)) for hole in plan.interiors)]


def outline(shape: Polygon) -> Ring:
    """The outer ring of a polygon, its straight vertices left out."""
    return [(float(x), float(y)) for x, y in shape.simplify(0).exterior.coords[:-1]]


def scaled(ring: Ring, factor: float) -> Ring:
    """The ring times a factor."""
    return [(factor * x, factor * y) for x, y in ring]


def moved(ring: Ring, x: float, y: float) -> Ring:
    """The ring shifted."""
    return [(p + x, q + y) for p, q in ring]


def turned(ring: Ring, degrees: float) -> Ring:
    """The ring rotated about the origin."""
    c, s = float(np.cos(np.radians(degrees))), float(np.sin(np.radians(degrees)))
    return [(c * x - s * y, s * x + c * y) for x, y in ring]
