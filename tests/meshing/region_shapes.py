"""Plane domains with regions, cut into conforming segments, and what must hold for their meshes."""

from dataclasses import replace
from itertools import pairwise

import numpy as np
import shapely
from meshing_shapes import L_SHAPE, SQUARE, domain, square_hole

from service.meshing.mesh import Mesh
from service.meshing.quality import volumes
from service.problem.domain import PlaneDomain, Region

GRID = 2.0**-44


def polygon(rings) -> shapely.Polygon:
    outer, *holes = rings
    return shapely.Polygon(outer, holes)


def whole(shape: PlaneDomain) -> shapely.Polygon:
    return polygon([shape.points[shape.edges[shape.loops == loop, 0]] for loop in np.unique(shape.loops)])


def with_regions(shape: PlaneDomain, **regions) -> PlaneDomain:
    """The domain with named regions, a list of rings each: all lines cut where they meet, on a grid."""
    lines = [whole(shape).boundary, *(polygon(rings).boundary for rings in regions.values())]
    network = shapely.unary_union(lines, grid_size=GRID)
    parts = [shapely.get_coordinates(line) for line in shapely.get_parts(network)]
    segments = np.concatenate([np.stack([part[:-1], part[1:]], axis=1) for part in parts])
    middles = shapely.points(segments.mean(axis=1))
    segments = segments[shapely.contains(whole(shape), middles)]
    ends = [segments.reshape(-1, 2), shapely.get_coordinates(network)]
    on_rim = shapely.dwithin(whole(shape).boundary, shapely.points(ends[1]), 10 * GRID)
    places = np.unique(np.vstack([ends[0], ends[1][on_rim]]), axis=0)
    fresh = np.abs(places[:, None] - shape.points).max(axis=2).min(axis=1) > 10 * GRID
    points = np.vstack([shape.points, places[fresh]])

    pairs, parents = [], []
    for number, (start, end) in enumerate(shape.edges):
        a, along = points[start], points[end] - points[start]
        inside = shapely.dwithin(shapely.linestrings([points[start], points[end]]), shapely.points(points), 10 * GRID)
        inside[[start, end]] = False
        between = np.flatnonzero(inside)
        between = between[np.argsort((points[between] - a) @ along)]
        chain = [start, *between, end]
        pairs += list(pairwise(chain))
        parents += [number] * (len(chain) - 1)
    # Pieces of the outline that the rounding to the grid has put just inside are no interfaces.
    numbers = [np.abs(points - end[:, None]).max(axis=2).argmin(axis=1) for end in segments.swapaxes(0, 1)]
    rim = {frozenset(map(int, pair)) for pair in pairs}
    inner = [pair for pair in np.column_stack(numbers).tolist() if frozenset(pair) not in rim]
    return replace(
        shape,
        points=points,
        edges=np.array(pairs, dtype=np.int64),
        loops=shape.loops[parents],
        part=shape.part[parents],
        interfaces=np.array(inner, dtype=np.int64).reshape(-1, 2),
        regions=tuple(
            Region(name, tuple(np.asarray(ring, dtype=np.float64) for ring in rings)) for name, rings in regions.items()
        ),
    )


def box(x0: float, y0: float, x1: float, y1: float) -> list[list[tuple[float, float]]]:
    """The rings of a rectangle."""
    return [[(x0, y0), (x1, y0), (x1, y1), (x0, y1)]]


def checkerboard(count: int) -> PlaneDomain:
    """The unit square with every second of count × count squares a region."""
    side = 1 / count
    return with_regions(
        domain(SQUARE),
        **{
            f"r{i}{j}": box(i * side, j * side, (i + 1) * side, (j + 1) * side)
            for i in range(count)
            for j in range(count)
            if (i + j) % 2 == 0
        },
    )


REGIONS = {
    "half": with_regions(domain(SQUARE), left=box(0, 0, 0.5, 1)),
    "L in a square": with_regions(domain(SQUARE), bend=[0.25 * np.array(L_SHAPE) + 0.5]),
    "island": with_regions(domain(SQUARE), island=box(0.3, 0.4, 0.6, 0.5)),
    "ring": with_regions(domain(SQUARE), ring=[*box(0.2, 0.2, 0.8, 0.8), *box(0.4, 0.3, 0.7, 0.6)]),
    "triple point": with_regions(
        domain(SQUARE), one=[[(0, 0), (1, 0), (0.5, 0.5)]], two=[[(1, 0), (1, 1), (0.5, 1), (0.5, 0.5)]]
    ),
    "checkerboard 2": checkerboard(2),
    "checkerboard 8": checkerboard(8),
    "crossing": with_regions(domain(SQUARE), across=box(-1, 0.4, 2, 0.7), up=box(0.3, -1, 0.6, 2)),
    "nested": with_regions(
        domain(SQUARE), outer=box(0.2, 0.2, 0.8, 0.8), inner=box(0.2, 0.2, 0.5, 0.5), same=box(0.2, 0.2, 0.8, 0.8)
    ),
    "shared sides": with_regions(
        domain(SQUARE), a=box(0.2, 0.2, 0.5, 0.8), b=box(0.5, 0.2, 0.8, 0.8), union=box(0.2, 0.2, 0.8, 0.8)
    ),
    "corner on the wall": with_regions(domain(SQUARE), kite=[[(0.5, 0), (0.7, 0.4), (0.5, 1), (0.3, 0.4)]]),
    "corner in the corner": with_regions(domain(L_SHAPE), wedge=[[(0, 0), (0.5, 1), (-0.5, 0.7)]]),
    "around the corner": with_regions(domain(L_SHAPE), middle=box(-0.5, -0.5, 0.5, 0.5)),
    "around a hole": with_regions(
        domain(SQUARE, square_hole(0.4, 0.4, 0.2)), frame=box(0.3, 0.3, 0.6, 0.7), side=box(0, 0, 1, 0.4)
    ),
    "thin": with_regions(domain(SQUARE), film=box(0.2, 0.4, 0.8, 0.401)),
    "thin at the wall": with_regions(domain(SQUARE), coat=box(0, 0, 1, 1e-3)),
    "slanted": with_regions(
        domain(SQUARE),
        band=[[(-0.1, 0.2), (1.1, 0.5), (1.1, 0.6), (-0.1, 0.3)]],
        disc=[0.5 + 0.3 * np.column_stack([np.cos(np.arange(24) * np.pi / 12), np.sin(np.arange(24) * np.pi / 12)])],
    ),
    "everywhere": with_regions(domain(SQUARE), everything=box(-1, -1, 2, 2)),
    "nowhere": with_regions(domain(SQUARE), nothing=box(2, 2, 3, 3)),
}


def check_regions(mesh: Mesh, shape: PlaneDomain) -> None:
    """Every region has its area, and every cell is where its memberships say, by its centroid."""
    assert mesh.regions.shape == (len(mesh.cells), len(shape.regions))
    assert mesh.regions.dtype == bool
    area = volumes(mesh) * mesh.unit**2
    centroid = mesh.points[mesh.cells].mean(axis=1) * mesh.unit + np.array(mesh.origin)
    for column, region in zip(mesh.regions.T, shape.regions, strict=True):
        exact = shapely.intersection(polygon(region.rings), whole(shape))
        assert abs(area[column].sum() - exact.area) < 1e-11
        outline = polygon(region.rings)
        away = ~shapely.dwithin(outline.boundary, shapely.points(centroid), 1e-12)
        assert away.mean() > 0.1
        inside = shapely.contains_xy(outline, centroid[:, 0], centroid[:, 1])
        assert np.array_equal(inside[away], column[away])


def interface_facets(mesh: Mesh) -> np.ndarray:
    """Which facets separate cells of different memberships."""
    left, right = mesh.facet_cells.T
    return (right >= 0) & (mesh.regions[left] != mesh.regions[right]).any(axis=1)
