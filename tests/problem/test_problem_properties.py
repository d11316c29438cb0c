"""Random documents against shapely's exact predicates and lengths, and against each other."""

import math
from itertools import combinations

import numpy as np
import pytest
import shapely
from hypothesis import assume, event, given, settings
from hypothesis import strategies as st
from problem_documents import (
    KNOWN,
    area,
    edge_set,
    faults,
    inputs,
    lengths,
    multi,
    part,
    pointers,
    polygon,
    read,
)

from service.problem.request import canonical, read_request

RANDOM = settings(max_examples=80, deadline=None)

GRID = st.tuples(st.integers(0, 6), st.integers(0, 6)).map(list)


def without_repetition(ring):
    return all(a != b for a, b in zip(ring, [*ring[1:], ring[0]], strict=True))


RINGS = st.lists(GRID, min_size=3, max_size=8).filter(without_repetition)


@st.composite
def small_ring(draw):
    """Three or four grid points close together."""
    x, y = draw(GRID)
    near = st.tuples(st.integers(0, 3), st.integers(0, 3))
    return [[x + dx, y + dy] for dx, dy in draw(st.lists(near, min_size=3, max_size=4, unique=True))]


OUTER = st.one_of(
    RINGS,
    st.just([[0, 0], [9, 0], [9, 9], [0, 9]]),
    st.just([[0, 0], [9, 0], [9, 9], [3, 3], [0, 9]]),
)


@st.composite
def star_shaped(draw):
    """A simple polygon round the origin, counter-clockwise, no two corners in the same direction."""
    count = draw(st.integers(3, 12))
    steps = draw(st.lists(st.floats(0.1, 1), min_size=count, max_size=count))
    radii = draw(st.lists(st.floats(0.2, 2), min_size=count, max_size=count))
    angles = np.cumsum(steps) * (2 * math.pi / sum(steps))
    assume(max(np.diff(angles, prepend=0)) < 3)
    return [[r * math.cos(a), r * math.sin(a)] for r, a in zip(radii, angles, strict=True)]


@given(RINGS)
@RANDOM
def test_a_ring_is_accepted_exactly_where_simple_features_accept_it(ring):
    """OGC 06-103r4, section 6.1.11.1, as shapely decides it; on a grid all predicates are exact."""
    document = inputs(polygon(ring))
    expected = shapely.Polygon(ring)
    assert (faults(document) == []) == bool(expected.is_valid)
    if expected.is_valid:
        domain = read_request(document, KNOWN).domain
        assert area(domain) == expected.area
        assert len(domain.points) == len(ring)
        assert domain.components == 1


@given(OUTER, st.lists(small_ring(), min_size=1, max_size=3))
@RANDOM
def test_holes_are_accepted_exactly_where_they_leave_a_domain(outer, holes):
    """As simple features demand, except that rings may touch so that the inside falls apart.

    The conditions are checked ring by ring: shapely reports only the first thing it finds.
    """
    whole, cut = shapely.Polygon(outer), [shapely.Polygon(hole) for hole in holes]
    fine = (
        all(region.is_valid for region in (whole, *cut))
        and all(whole.covers(hole) for hole in cut)
        and not any(shapely.relate_pattern(*pair, "T********") for pair in combinations(cut, 2))
        and not any(one.boundary.intersection(two.boundary).length for one, two in combinations([whole, *cut], 2))
    )
    event("fine" if fine else "faulty")
    document = inputs(polygon(outer, *holes))
    assert (faults(document) == []) == fine
    if fine:
        domain = read_request(document, KNOWN).domain
        region = whole.difference(shapely.union_all(cut))
        event(f"{domain.components} components")
        assert area(domain) == region.area
        assert domain.components == len(shapely.get_parts(region))


@given(st.lists(small_ring(), min_size=2, max_size=4))
@RANDOM
def test_pieces_are_united_exactly_where_they_do_not_overlap(rings):
    pieces = [shapely.Polygon(ring) for ring in rings]
    assume(all(piece.is_valid for piece in pieces))
    apart = not any(shapely.relate_pattern(*pair, "T********") for pair in combinations(pieces, 2))
    document = inputs(multi(*([ring] for ring in rings)))
    event("apart" if apart else "overlapping")
    assert (faults(document) == []) == apart
    if apart:
        domain = read_request(document, KNOWN).domain
        union = shapely.union_all(pieces)
        assert area(domain) == sum(piece.area for piece in pieces)
        assert domain.components == len(shapely.get_parts(union))
        assert sum(lengths(domain).values()) == _approximately(union.length)


def _approximately(value):
    """A sum of a few dozen lengths, each rounded: the relative error is far below 1e-13."""
    return pytest.approx(value, rel=1e-13, abs=1e-13)


@st.composite
def grid_polygon(draw):
    """A simple polygon with corners on the grid: grid points ordered by direction from a point off it."""
    points = np.array(draw(st.lists(GRID, min_size=3, max_size=9, unique_by=tuple)))
    x, y = (points - points.mean(axis=0) - [0.01, 0.003]).T
    ring = points[np.argsort(np.arctan2(y, x))].tolist()
    assume(shapely.Polygon(ring).is_valid)
    return ring


@st.composite
def selector_of(draw, ring):
    """Along an edge, round a corner, or a box; all coordinates are multiples of 1/4."""
    index = draw(st.integers(0, len(ring) - 1))
    a, b, c = (np.array(ring[(index + step) % len(ring)]) for step in (0, 1, 2))
    shares = st.sampled_from([-1, 0, 0.25, 0.5, 0.75, 1, 2])
    first, last = draw(st.tuples(shares, shares).filter(lambda pair: pair[0] != pair[1]))
    kind = draw(st.sampled_from(["segment", "polyline", "box"]))
    p = (a + first * (b - a)).tolist()
    if kind == "segment":
        return {"segment": [p, (a + last * (b - a)).tolist()]}
    if kind == "polyline":
        q = (b + last * (c - b)).tolist()
        middle = b.tolist()
        assume(p != middle)
        assume(q != middle)
        return {"polyline": [p, middle, q]}
    corners = np.sort(np.array([p, draw(GRID)]), axis=0).tolist()
    assume(corners[0] != corners[1])
    return {"box": corners}


def region_of(selector):
    ((kind, points),) = selector.items()
    return shapely.box(*points[0], *points[1]) if kind == "box" else shapely.LineString(points)


@given(grid_polygon(), st.data())
@RANDOM
def test_the_selected_length_is_that_of_the_intersection(ring, data):
    """Shapely's intersection of the boundary with the selector, on a grid."""
    selector = data.draw(selector_of(ring))
    length = shapely.intersection(shapely.Polygon(ring).boundary, region_of(selector)).length
    document = inputs(polygon(ring), [part("it", selector)])
    if length == 0:
        assert [pointer for pointer, _ in faults(document)] == ["/problem/boundary/0/on"]
    else:
        assert lengths(read_request(document, KNOWN).domain)["it"] == _approximately(length)


@given(grid_polygon(), st.data())
@RANDOM
def test_two_parts_are_accepted_exactly_where_they_share_no_length(ring, data):
    first, second = data.draw(selector_of(ring)), data.draw(selector_of(ring))
    boundary = shapely.Polygon(ring).boundary
    one, other = (shapely.intersection(boundary, region_of(selector)) for selector in (first, second))
    expected = [f"/problem/boundary/{i}/on" for i, found in enumerate((one, other)) if found.length == 0]
    # What they share on this grid is longer than 1e-4, or a point, widened here to less than that.
    if not expected and shapely.intersection(one, region_of(second).buffer(1e-8)).length > 1e-4:
        expected = ["/problem/boundary/1/on"]
    assert pointers(inputs(polygon(ring), [part("one", first), part("other", second)])) == expected


@given(star_shaped(), st.data())
@RANDOM
def test_random_parts_cover_the_boundary_and_leave_area_and_perimeter(ring, data):
    """Segments between two shares of one edge, whose ends carry rounding errors."""
    parts, wanted = [], {}
    for index, (a, b) in enumerate(zip(ring, [*ring[1:], ring[0]], strict=True)):
        shares = sorted(data.draw(st.lists(st.floats(0.01, 0.99), min_size=0, max_size=4, unique=True)))
        ends = [[a[0] + s * (b[0] - a[0]), a[1] + s * (b[1] - a[1])] for s in shares]
        for number, (p, q) in enumerate(zip(ends[::2], ends[1::2], strict=False)):
            if math.dist(p, q) > 1e-6:
                name = f"{index}-{number}"
                parts.append(part(name, {"segment": data.draw(st.permutations([p, q]))}))
                wanted[name] = math.dist(p, q)
    parts.append(part("rest", "remainder"))
    plain, domain = read(polygon(ring)).domain, read(polygon(ring), parts).domain
    found = lengths(domain)
    for name, length in wanted.items():
        assert abs(found[name] - length) < 1e-12
    assert math.isclose(sum(found.values()), sum(lengths(plain).values()), rel_tol=1e-14)
    assert math.isclose(area(domain), area(plain), rel_tol=1e-14)
    assert math.isclose(area(plain), shapely.Polygon(ring).area, rel_tol=1e-13)
    assert {tuple(point) for point in ring} <= {tuple(point) for point in domain.points.tolist()}


@given(star_shaped(), st.integers(0, 11), st.booleans(), st.booleans(), st.floats(0.1, 0.4))
@RANDOM
def test_numbering_orientation_and_closing_vertex_do_not_matter(ring, shift, turn, close, share):
    (x0, y0), (x1, y1) = ring[0], ring[1]
    parts = [
        part("a", {"segment": [[x0, y0], [x0 + share * (x1 - x0), y0 + share * (y1 - y0)]]}),
        part("rest", "remainder", "neumann"),
    ]
    other = ring[shift % len(ring) :] + ring[: shift % len(ring)]
    other = other[::-1] if turn else other
    other = [*other, other[0]] if close else other
    assert edge_set(read(polygon(other), parts).domain) == edge_set(read(polygon(ring), parts).domain)


@given(grid_polygon(), st.data(), st.booleans())
@RANDOM
def test_the_canonical_document_reads_as_the_same_request(ring, data, as_geojson):
    shape = multi([ring]) if as_geojson else polygon(ring)
    document = inputs(shape, [part("it", data.draw(selector_of(ring)))])
    if faults(document):
        document = inputs(shape)
    form = canonical(document, KNOWN)
    assert read_request(form, KNOWN) == read_request(document, KNOWN)
    assert canonical(form, KNOWN) == form


@given(star_shaped(), st.integers(-300, 300))
@RANDOM
def test_scaling_by_a_power_of_two_scales_every_bit(ring, exponent):
    scaled = [[math.ldexp(x, exponent), math.ldexp(y, exponent)] for x, y in ring]
    points = read(polygon(scaled)).domain.points
    assert np.array_equal(points, np.ldexp(read(polygon(ring)).domain.points, exponent))
