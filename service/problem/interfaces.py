"""A domain with its regions: interfaces inside it, and boundary edges split where regions end on them."""

import numpy as np
import shapely
from numpy.typing import NDArray

from service.problem.border import Border, border_of, domain_polygons
from service.problem.domain import PlaneDomain, Region
from service.problem.drawing import Drawing, RegionError, strokes_of
from service.problem.noding import UNSTABLE, noded
from service.problem.placing import drawing_of
from service.problem.positions import Points, say
from service.problem.regions import RegionOutline
from service.problem.segments import Indices, Subdivision, inner, renumber, subdivide

NARROW = (
    "Near {point} the region comes within {tolerance} of itself, where its sides cannot be told apart in this domain."
)

FARTHEST = 1e6
"""How far a region may reach beyond the domain, in diameters; farther, its sides are not exact enough."""


def with_regions(
    domain: PlaneDomain, regions: tuple[RegionOutline, ...], exponent: int, tolerance: float
) -> PlaneDomain | None:
    """The domain with its regions, ``None`` after faults have been recorded at their shapes.

    What is closer than the tolerance is one point, or lies on one line. The rings of the regions pass all
    points of the domain that lie on them, so that the interfaces are parts of them exactly.

    domain : without regions.
    exponent, tolerance : of its outline and its edges; the tolerance is in scaled units.
    """
    if not regions:
        return domain
    border = border_of(domain, exponent, tolerance)
    rings = [np.ldexp(ring, -exponent) for region in regions for ring in region.rings]
    owner = np.repeat(np.arange(len(regions)), [len(region.rings) for region in regions])
    if _far_away(border, rings, owner, regions):
        return None
    try:
        drawing = noded(drawing_of(border, rings, owner), border)
        interfaces, missing = inner_strokes(drawing, border, domain_polygons(domain, exponent))
    except RegionError as clash:
        point, length = say(np.ldexp(clash.point, exponent)), f"{np.ldexp(tolerance, exponent):.3g}"
        regions[clash.region].place.refuse(clash.sentence.format(point=point, tolerance=length))
        return None
    for number in missing:
        regions[number].place.refuse("The region has no area in common with the domain.")
    return None if missing else _assembled(domain, border, drawing, interfaces, regions)


def _far_away(border: Border, rings: list[Points], owner: Indices, regions: tuple[RegionOutline, ...]) -> bool:
    """Whether a region reaches too far; records which."""
    low, high = border.points.min(axis=0), border.points.max(axis=0)
    reach = FARTHEST * float(np.hypot(*(high - low)))
    far = [bool(((ring < low - reach) | (ring > high + reach)).any()) for ring in rings]
    for number in np.unique(owner[far]).tolist():
        regions[number].place.refuse(
            f"The region reaches more than {FARTHEST:g} times the domain's diameter beyond the domain."
        )
    return any(far)


def inner_strokes(drawing: Drawing, border: Border, pieces: NDArray[np.object_]) -> tuple[Indices, list[int]]:
    """The segments of sides inside the domain, (k, 2) vertex numbers, and the regions that do not meet it."""
    strokes = strokes_of(drawing)
    ends = np.stack([strokes.start, strokes.end], axis=1)
    edges = _divided(drawing, border)
    size = len(drawing.points)
    free = ~np.isin(_keys(strokes.start, strokes.end, size), _keys(edges.start, edges.end, size))
    inside = np.zeros(len(ends), dtype=bool)
    inside[free] = _inside(pieces, drawing.points[ends[free]].mean(axis=1))

    # An inner segment ends inside or on the boundary, unless the boundary is too close to be told from it.
    inner_vertex = np.unique(ends[inside])
    inner_vertex = inner_vertex[(inner_vertex >= len(border.points)) & (drawing.line[inner_vertex] < 0)]
    astray = inner_vertex[~_inside(pieces, drawing.points[inner_vertex])]
    if len(astray):
        side = int(np.argmax((drawing.start == astray[0]) | (drawing.end == astray[0])))
        raise RegionError(drawing.owner(side), drawing.points[astray[0]], UNSTABLE)

    polygons = _polygons(drawing)
    torn = np.flatnonzero(~shapely.is_valid(polygons))
    if len(torn):
        vertex, count = np.unique(drawing.start[drawing.region[drawing.ring] == torn[0]], return_counts=True)
        raise RegionError(int(torn[0]), drawing.points[vertex[np.argmax(count)]], NARROW)
    _, sides = strokes.sides(np.flatnonzero(inside))
    crossed = np.unique(drawing.region[drawing.ring[sides]])
    others = np.setdiff1d(np.arange(len(polygons)), crossed)
    within = shapely.point_on_surface(pieces)
    missing = [number for number in others.tolist() if not shapely.contains(polygons[number], within).any()]
    return ends[inside], missing


def _assembled(
    domain: PlaneDomain,
    border: Border,
    drawing: Drawing,
    interfaces: Indices,
    regions: tuple[RegionOutline, ...],
) -> PlaneDomain:
    """The domain with its vertices numbered anew: those of the boundary as the loops pass them, then the others."""
    edges = _divided(drawing, border)
    outer, start, end = renumber(edges.start, edges.end)
    used = np.concatenate([outer, np.setdiff1d(interfaces, outer)])
    label = np.full(len(drawing.points), -1, dtype=np.int64)
    label[used] = np.arange(len(used))

    points = np.ldexp(drawing.points, border.exponent) + 0.0
    points[: len(domain.points)] = domain.points
    hosts = drawing.between.copy()
    hosts[: len(domain.points)] = domain.hosts
    divides = np.flatnonzero(drawing.line >= 0)
    hosts[divides] = border.ends[drawing.line[divides]]
    unknown = (label[hosts] < 0).any(axis=1)
    hosts[unknown] = np.flatnonzero(unknown)[:, None]
    rings = _rings(drawing)
    return PlaneDomain(
        points=points[used],
        edges=np.stack([start, end], axis=1),
        loops=domain.loops[edges.parent],
        part=domain.part[edges.parent],
        parts=domain.parts,
        components=domain.components,
        interfaces=np.unique(np.sort(label[interfaces], axis=1), axis=0),
        regions=tuple(
            Region(region.name, tuple(points[rings[ring]] for ring in np.flatnonzero(drawing.region == number)))
            for number, region in enumerate(regions)
        ),
        hosts=label[hosts[used]],
    )


def _divided(drawing: Drawing, border: Border) -> Subdivision:
    """The boundary edges cut at all vertices that lie on them."""
    vertex = np.flatnonzero(drawing.line >= 0)

    def share(vertex: Indices, line: Indices) -> NDArray[np.float64]:
        start, end = drawing.points[border.ends[line, 0]], drawing.points[border.ends[line, 1]]
        return inner(drawing.points[vertex] - start, end - start) / inner(end - start, end - start)

    line = np.append(border.line, drawing.line[vertex])
    place = share(np.append(border.start, vertex), line)
    order = np.lexsort((place, line))
    # Each vertex lies on the last edge of its line that starts before it.
    edge = np.maximum.accumulate(np.where(order < len(border.line), np.arange(len(order)), 0))
    owner = np.empty(len(order), dtype=np.int64)
    owner[order] = order[edge]
    owner, place = owner[len(border.line) :], place[len(border.line) :]
    along = np.lexsort((place, owner))
    return subdivide(border.start, border.end, owner[along], vertex[along])


def _keys(start: Indices, end: Indices, size: int) -> Indices:
    """One number for each pair of vertices, whatever its direction."""
    return np.minimum(start, end) * size + np.maximum(start, end)


def _inside(pieces: NDArray[np.object_], points: Points) -> NDArray[np.bool_]:
    """Whether each point lies inside one of some polygons without common inner points, (k,)."""
    whole = shapely.multipolygons(pieces)
    shapely.prepare(whole)
    found: NDArray[np.bool_] = shapely.contains_xy(whole, points[:, 0], points[:, 1])
    return found


def _rings(drawing: Drawing) -> list[Indices]:
    """The vertex numbers of each ring."""
    return np.split(drawing.start, np.flatnonzero(np.diff(drawing.ring)) + 1)


def _polygons(drawing: Drawing) -> NDArray[np.object_]:
    """The regions as scaled polygons."""
    rings = shapely.linearrings(drawing.points[drawing.start], indices=drawing.ring)
    found: NDArray[np.object_] = shapely.polygons(rings, indices=drawing.region)
    return found
