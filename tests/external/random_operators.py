"""Random problems that are hard for bounds: contrasts, jumps, inflow, exchange of any size (all invented).

Every value is made twice, as the text of the problem document and as a NumPy function, so that whoever checks a bound
need not read the service's expressions.
"""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray
from shapely import Polygon, box
from shapely.ops import unary_union

JSON = dict[str, Any]
Array = NDArray[np.float64]
Point = tuple[float, float]
Ring = list[Point]
Rectangle = tuple[float, float, float, float]
Random = np.random.Generator

GRID = 64


@dataclass(frozen=True)
class Value:
    """A number at every point: its text, and the same as a function of x and y."""

    text: str
    at: Callable[[Array, Array], Array]


@dataclass(frozen=True)
class Piecewise:
    """Values of one coefficient, one component after the other; by region, the one for everywhere else last.

    The first entry whose region contains the place holds.
    """

    entries: tuple[tuple[str | None, tuple[Value, ...]], ...]


@dataclass(frozen=True)
class Part:
    """A piece of the boundary.

    chain : of points along the boundary; ``None`` for the remainder.
    """

    name: str
    chain: Ring | None
    condition: Literal["dirichlet", "neumann", "robin"]
    exchange: Piecewise | None = None


@dataclass(frozen=True)
class Case:
    """A problem. diffusion : k11, k12, k21, k22. velocity : two components, or one stream function, or None."""

    rings: tuple[Ring, ...]
    regions: dict[str, Rectangle]
    parts: tuple[Part, ...]
    diffusion: Piecewise
    velocity: Piecewise | None
    reaction: Piecewise
    form: Literal["convective", "conservative"]
    norm: JSON

    def document(self) -> JSON:
        """The problem document."""
        operator: JSON = {
            "diffusion": written(self.diffusion, lambda k: [[k[0].text, k[1].text], [k[2].text, k[3].text]]),
            "reaction": written(self.reaction, scalar),
            "form": self.form,
        }
        if self.velocity is not None:
            operator["velocity"] = written(self.velocity, lambda b: [component.text for component in b])
        boundary = []
        for part in self.parts:
            on = "remainder" if part.chain is None else {"polyline": [list(point) for point in part.chain]}
            entry: JSON = {"name": part.name, "on": on, "condition": part.condition}
            if part.exchange is not None:
                entry["exchange"] = written(part.exchange, scalar)
            boundary.append(entry)
        rings = [[list(point) for point in ring] for ring in self.rings]
        regions = [
            {"name": name, "shape": {"rectangle": {"corner": [x0, y0], "size": [x1 - x0, y1 - y0]}}}
            for name, (x0, y0, x1, y1) in self.regions.items()
        ]
        return {
            "domain": {"shape": {"polygon": {"outer": rings[0], "holes": rings[1:]}}, "regions": regions},
            "boundary": boundary,
            "operator": operator,
            "norm": self.norm,
        }


def scalar(values: tuple[Value, ...]) -> str:
    return values[0].text


def written(piecewise: Piecewise, text: Callable[[tuple[Value, ...]], Any]) -> list[JSON]:
    """The list by region of a problem document."""
    return [
        {"value": text(values)} if name is None else {"region": name, "value": text(values)}
        for name, values in piecewise.entries
    ]


def number(value: float) -> Value:
    value = float(value)
    return Value(f"({value!r})", lambda x, y: np.full_like(x, value))


def linear(mean: float, slope_x: float, slope_y: float) -> Value:
    a, b, c = float(mean), float(slope_x), float(slope_y)
    return Value(f"({a!r}) + ({b!r})*x + ({c!r})*y", lambda x, y: a + b * x + c * y)


def wave(mean: float, size: float, first: float, second: float) -> Value:
    """mean + size sin(first x + second y)."""
    m, s, a, b = float(mean), float(size), float(first), float(second)
    return Value(f"({m!r}) + ({s!r})*sin(({a!r})*x + ({b!r})*y)", lambda x, y: m + s * np.sin(a * x + b * y))


def cosine(size: float, first: float, second: float) -> Value:
    s, a, b = float(size), float(first), float(second)
    return Value(f"({s!r})*cos(({a!r})*x + ({b!r})*y)", lambda x, y: s * np.cos(a * x + b * y))


def star(random: Random) -> tuple[Ring, ...]:
    """Star-shaped about the origin: one vertex in each of n sectors, radii between 1/4 and 2, counter-clockwise."""
    count = int(random.integers(3, 10))
    angles = 2 * np.pi * (np.arange(count) + random.uniform(0, 0.6, count)) / count
    reach = random.uniform(0.25, 2, count)
    points = np.rint(GRID * np.column_stack([reach * np.cos(angles), reach * np.sin(angles)])) / GRID
    return ([(float(x), float(y)) for x, y in points],)


def blocks(random: Random) -> tuple[Ring, ...]:
    """Connected squares of a grid: right angles outward and inward, and holes; nothing touches in a point."""
    while True:
        cells = {(0, 0)}
        for _ in range(int(random.integers(1, 8))):
            x, y = sorted(cells)[random.integers(len(cells))]
            dx, dy = [(1, 0), (0, 1), (-1, 0), (0, -1)][random.integers(4)]
            cells.add((x + dx, y + dy))
        shape = unary_union([box(x, y, x + 1, y + 1) for x, y in sorted(cells)]).normalize()
        borders = [shape.exterior, *shape.interiors]
        corners = [point for ring in borders for point in ring.coords[:-1]]
        if len(set(corners)) == len(corners):
            rings = [Polygon(ring).simplify(0) for ring in borders]
            return tuple([(float(x), float(y)) for x, y in ring.exterior.coords[:-1]] for ring in rings)


def slab(random: Random) -> tuple[Ring, ...]:
    """A rectangle, up to sixteen times as long as high."""
    width, height = float(2.0 ** random.integers(-1, 3)), float(2.0 ** random.integers(-2, 1))
    return ([(0.0, 0.0), (width, 0.0), (width, height), (0.0, height)],)


def power(random: Random, low: float, high: float) -> float:
    """Uniform on a logarithmic scale, between powers of ten."""
    return float(10.0 ** random.uniform(low, high))


def sign(random: Random) -> float:
    return float(random.choice([-1.0, 1.0]))


def checkerboard(random: Random, rings: tuple[Ring, ...]) -> dict[str, Rectangle]:
    """The black squares of a board of up to 4 x 4 over the domain, lines on a grid; or one strip; or none."""
    points = np.array(rings[0])
    low, high = points.min(axis=0), points.max(axis=0)
    lines = []
    for axis in range(2):
        count = int(random.integers(1, 4))
        inner = np.unique(np.rint(8 * random.uniform(low[axis], high[axis], count)) / 8)
        lines.append([float(low[axis]) - 1, *map(float, inner), float(high[axis]) + 1])
    kind = random.choice(["none", "strip", "board"], p=[0.2, 0.2, 0.6])
    if kind == "none":
        return {}
    xs, ys = lines
    if kind == "strip":
        ys = [ys[0], ys[-1]]
    whole = Polygon(rings[0], rings[1:])
    squares = [
        (xs[i], ys[j], xs[i + 1], ys[j + 1])
        for i in range(len(xs) - 1)
        for j in range(len(ys) - 1)
        if (i + j) % 2 == 0 and whole.intersection(box(xs[i], ys[j], xs[i + 1], ys[j + 1])).area > 0
    ]
    return {f"square {k}": square for k, square in enumerate(squares)}


def by_region(random: Random, regions: dict[str, Rectangle], make: Callable[[], tuple[Value, ...]]) -> Piecewise:
    """The same everywhere, or in two colours, or another value in every region."""
    kind = random.choice(["same", "colours", "each"])
    if kind == "same":
        return Piecewise(((None, make()),))
    black = make()
    named = tuple((name, black if kind == "colours" else make()) for name in regions)
    return Piecewise((*named, (None, make())))


def diffusion(random: Random, regions: dict[str, Rectangle], size: float) -> Piecewise:
    """Contrasts up to a million, one anisotropic matrix with a skew part, or waves."""
    zero = number(0.0)
    kind = random.choice(["contrast", "matrix", "waves"], p=[0.6, 0.25, 0.15])
    if kind == "matrix":
        turn = random.uniform(0, np.pi)
        axes = np.array([[np.cos(turn), -np.sin(turn)], [np.sin(turn), np.cos(turn)]])
        matrix = size * axes @ np.diag([1.0, power(random, 0, 3)]) @ axes.T
        skew = random.uniform(-1, 1) * size
        entries = (matrix[0, 0], matrix[0, 1] + skew, matrix[1, 0] - skew, matrix[1, 1])
        return Piecewise(((None, tuple(number(entry) for entry in entries)),))
    spread = random.uniform(0, 3)

    def isotropic() -> tuple[Value, ...]:
        mean = size * power(random, -spread, spread)
        value = number(mean) if kind == "contrast" else wave(mean, 0.4 * mean, *random.uniform(-3, 3, 2))
        return value, zero, zero, value

    return by_region(random, regions, isotropic)


def velocity(random: Random, regions: dict[str, Rectangle], size: float) -> Piecewise | None:
    """None, constant, affine or rotating waves; in regions it jumps."""
    kind = random.choice(["none", "constant", "affine", "waves"], p=[0.2, 0.4, 0.25, 0.15])
    if kind == "none":
        return None

    def vector() -> tuple[Value, ...]:
        if kind == "constant":
            return tuple(number(value) for value in size * random.uniform(-1, 1, 2))
        if kind == "affine":
            return tuple(linear(*size * random.uniform(-1, 1, 3)) for _ in range(2))
        first, second = random.uniform(-2, 2, 2)
        return cosine(size * second, first, second), cosine(-size * first, first, second)

    return by_region(random, regions, vector)


def reaction(random: Random, regions: dict[str, Rectangle], size: float) -> Piecewise:
    """Zero, or constants or waves of either sign."""
    kind = random.choice(["none", "constant", "waves"], p=[0.3, 0.5, 0.2])

    def value() -> tuple[Value, ...]:
        mean = size * random.uniform(-1, 1)
        if kind == "none":
            return (number(0.0),)
        if kind == "constant":
            return (number(mean),)
        return (wave(mean, size * random.uniform(0, 1), *random.uniform(-3, 3, 2)),)

    return by_region(random, regions, value)


def exchange(random: Random, regions: dict[str, Rectangle], size: float) -> Piecewise:
    """Next to nothing, of the size of the other terms and of either sign, or next to a Dirichlet part."""
    kind = random.choice(["tiny", "usual", "huge"])

    def value() -> tuple[Value, ...]:
        if kind == "usual":
            return (number(size * random.uniform(-1, 3)),)
        return (number(size * power(random, *((-12, -6) if kind == "tiny" else (3, 9)))),)

    return by_region(random, regions, value)


def parts(random: Random, rings: tuple[Ring, ...], regions: dict[str, Rectangle], size: float) -> tuple[Part, ...]:
    """The outer ring in up to four chains, some of them ending inside an edge; the holes are the remainder."""

    def part(name: str, chain: Ring | None) -> Part:
        condition = str(random.choice(["dirichlet", "neumann", "robin"], p=[0.35, 0.3, 0.35]))
        if condition == "dirichlet":
            return Part(name, chain, "dirichlet")
        if condition == "neumann":
            return Part(name, chain, "neumann")
        return Part(name, chain, "robin", exchange(random, regions, size))

    ring = rings[0]
    if random.random() < 0.3:
        middle = int(random.integers(len(ring)))
        (x0, y0), (x1, y1) = ring[middle], ring[(middle + 1) % len(ring)]
        ring = [*ring[: middle + 1], ((x0 + x1) / 2, (y0 + y1) / 2), *ring[middle + 1 :]]
    count = int(random.integers(1, min(4, len(ring)) + 1))
    if count == 1:
        return (part("all", None),)
    cuts = sorted(int(cut) for cut in random.choice(len(ring), count, replace=False))
    chains = []
    for start, end in zip(cuts, [*cuts[1:], cuts[0] + len(ring)], strict=True):
        chains.append([ring[i % len(ring)] for i in range(start, end + 1)])
    found = [part(f"chain {k}", chain) for k, chain in enumerate(chains)]
    return (*found, part("holes", None)) if len(rings) > 1 else tuple(found)


def norm(random: Random, held: bool) -> JSON:
    """One of the three; only h1 if nothing is held."""
    kind = str(random.choice(["h1", "seminorm", "diffusion"])) if held else "h1"
    return {"kind": kind, **({"length_scale": power(random, -1, 1)} if kind == "h1" else {})}


def case(seed: int) -> Case:
    """The problem of this number."""
    random = np.random.default_rng(seed)
    rings = (star, blocks, slab)[random.integers(3)](random)
    regions = checkerboard(random, rings)
    unit = power(random, -2, 2)
    strength = unit * power(random, -1, 1.5)
    pieces = parts(random, rings, regions, unit)
    return Case(
        rings=rings,
        regions=regions,
        parts=pieces,
        diffusion=diffusion(random, regions, unit),
        velocity=velocity(random, regions, strength),
        reaction=reaction(random, regions, unit * power(random, -1, 1.5)),
        form="convective" if random.random() < 0.5 else "conservative",
        norm=norm(random, any(part.condition == "dirichlet" for part in pieces)),
    )
