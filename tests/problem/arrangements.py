"""What the tests ask of a domain with regions: its cells, and that it is consistent with itself."""

import numpy as np
import shapely

from service.problem.domain import PlaneDomain


def domain_polygon(domain: PlaneDomain):
    """The domain as a shapely geometry."""
    lines = domain.points[domain.edges]
    faces = shapely.get_parts(shapely.polygonize(shapely.linestrings(lines)))
    start, end = lines[:, 0], lines[:, 1]
    kept = []
    for face in faces:
        x, y = shapely.get_coordinates(shapely.point_on_surface(face))[0]
        # Winding number by crossings of the ray to the right.
        up = (start[:, 1] <= y) & (end[:, 1] > y)
        down = (end[:, 1] <= y) & (start[:, 1] > y)
        side = (end[:, 0] - start[:, 0]) * (y - start[:, 1]) - (end[:, 1] - start[:, 1]) * (x - start[:, 0])
        if (up & (side > 0)).sum() - (down & (side < 0)).sum() == 1:
            kept.append(face)
    return shapely.union_all(kept)


def region_polygons(domain: PlaneDomain):
    """The regions as they stand in the domain."""
    return [shapely.Polygon(region.rings[0], region.rings[1:]) for region in domain.regions]


def cells(domain: PlaneDomain):
    """The faces into which edges and interfaces cut the domain."""
    lines = domain.points[np.concatenate([domain.edges, domain.interfaces])]
    faces = shapely.get_parts(shapely.polygonize(shapely.linestrings(lines)))
    whole = domain_polygon(domain)
    shapely.prepare(whole)
    return faces[shapely.contains(whole, shapely.point_on_surface(faces))]


def areas_by_region(domain: PlaneDomain) -> list[float]:
    """The area of the cells whose inner points lie in each region."""
    faces = cells(domain)
    inner = shapely.point_on_surface(faces)
    return [float(shapely.area(faces[shapely.contains(region, inner)]).sum()) for region in region_polygons(domain)]


def check_arrangement(domain: PlaneDomain, rounding: float, tolerance: float = 0.0) -> None:
    """Everything that ``PlaneDomain`` promises of its interfaces.

    rounding : what lengths are uncertain by.
    tolerance : slivers of regions that are no wider than this may be missing along the boundary.
    """
    points, segments = domain.points, np.concatenate([domain.edges, domain.interfaces])
    count = len(points)
    assert len(np.unique(points, axis=0)) == count
    assert np.array_equal(np.unique(segments), np.arange(count))
    keys = np.sort(segments, axis=1)
    assert len(np.unique(keys, axis=0)) == len(keys)

    # Segments meet at common ends only.
    lines = shapely.linestrings(points[segments])
    first, second = shapely.STRtree(lines).query(lines, predicate="intersects")
    first, second = first[first < second], second[first < second]
    common = (segments[first][:, :, None] == segments[second][:, None, :]).any(axis=(1, 2))
    assert common.all()
    met = shapely.intersection(lines[first], lines[second])
    assert float(shapely.length(met).max(initial=0)) <= rounding

    # Inner points lie inside the domain, on no boundary edge.
    whole = domain_polygon(domain)
    inner = np.setdiff1d(np.arange(count), domain.edges)
    assert shapely.contains_xy(whole, *points[inner].T).all()
    middle = points[domain.interfaces].mean(axis=1)
    assert shapely.contains_xy(whole, *middle.T).all()

    # A point that lies between two others is on the line between them, and those lie between no others.
    own = np.arange(count)
    hosted = np.flatnonzero(domain.hosts[:, 0] != own)
    assert np.array_equal(domain.hosts[hosted, 1] != hosted, np.ones(len(hosted), dtype=bool))
    ends = domain.hosts[hosted]
    assert np.array_equal(domain.hosts[ends.ravel(), 0], ends.ravel())
    off = shapely.distance(shapely.points(points[hosted]), shapely.linestrings(points[ends]))
    assert float(np.max(off, initial=0)) <= rounding

    # The regions consist of cells, and their boundaries inside the domain of interfaces.
    for region, area in zip(region_polygons(domain), areas_by_region(domain), strict=True):
        assert region.is_valid
        assert abs(region.intersection(whole).area - area) <= rounding * (region.length + whole.length)
        corners = {tuple(point) for ring in shapely.get_rings(region) for point in shapely.get_coordinates(ring)}
        strip = region.boundary.intersection(whole).difference(whole.boundary.buffer(rounding)).length
        mine = [
            float(np.hypot(*np.subtract(*points[segment])))
            for segment in domain.interfaces
            if {tuple(point) for point in points[segment]} <= corners
        ]
        assert sum(mine) >= strip - rounding * (10 + len(mine)) - 10 * tolerance
