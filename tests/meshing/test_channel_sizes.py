"""Triangles in narrow channels are no flatter than they must be, and nothing else becomes finer."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from meshing_shapes import L_SHAPE, SHAPES, SQUARE, check_mesh, comb, domain, square_hole, strip, turned

from service.meshing.channels import ASPECT, channel_sizes
from service.meshing.generate import mesh_domain
from service.meshing.quality import flatness, longest_edges
from service.meshing.sizing import vertex_sizes

FLATTEST = 200
BOTTLE = [(0, 0), (1, 0), (1, 0.4999), (2, 0.4999), (2, 0.5001), (1, 0.5001), (1, 1), (0, 1)]


def points_of(*rings, size=0.25, limit=50_000):
    shape = domain(*rings)
    wanted = vertex_sizes(shape.points, shape.edges, size)
    return channel_sizes(shape.points, shape.edges, wanted, size, limit)


@pytest.mark.parametrize(
    ("shape", "most"),
    [
        (SHAPES["strip 1e-3"], 40),
        (SHAPES["strip 1e-6"], 15_000),
        (SHAPES["turned strip 1e-6"], 15_000),
        (SHAPES["hole near the wall"], 300),
        (domain(turned(strip(1e-4), 90)), 300),
        (domain(BOTTLE), 250),
        (domain(SQUARE, square_hole(1e-6, 0.1, 0.1)), 2000),
        (domain([(0, 0), (1, 0), (1, 1e-2), (0, 1e-5)]), 50),
        (domain([(0, 0), (1, 0), (1, 1e-3), (0, 1e-5)]), 200),
        # A channel that only half of a long edge sees, and one between pieces of different edges.
        (domain([(0, 0), (1, 0), (1, 1e-5), (0.9, 1e-5), (0.9, 1), (0, 1)]), 300),
        (domain([(0, 0), (0.4, 0), (1, 0), (1, 1e-4), (0.7, 1e-4), (0, 1e-4)]), 300),
    ],
)
def test_no_triangle_is_flatter_than_can_be_helped(shape, most):
    mesh = mesh_domain(shape, size=0.3, target=1e-3)
    check_mesh(mesh, shape)
    assert flatness(mesh).max() <= FLATTEST
    assert len(mesh.cells) <= most


def test_a_channel_is_refined_and_the_body_is_not():
    mesh = mesh_domain(domain(BOTTLE), size=0.3, target=1e6)
    body = mesh_domain(domain(SQUARE), size=0.3, target=1e6)
    inside = (mesh.points[mesh.cells][:, :, 0] * mesh.unit <= 1).all(axis=1)
    in_channel = longest_edges(mesh)[~inside] * mesh.unit
    assert inside.sum() <= 4 * len(body.cells)
    assert in_channel.max() <= 2e-4 * FLATTEST
    assert np.median(in_channel) >= 2e-4 * ASPECT / 2


@pytest.mark.parametrize(
    "rings", [(SQUARE,), (L_SHAPE,), (comb(10),), (SQUARE, square_hole(0.7, 0.6, 1e-6)), (strip(0.01),)]
)
def test_wide_domains_have_no_channels(rings):
    places, sizes = points_of(*rings)
    assert places.shape == (0, 2)
    assert sizes.shape == (0,)


def test_outside_a_notch_is_no_channel():
    """A cut 1e-4 wide between two prongs, not through the domain."""
    prongs = [(0, 0), (1, 0), (1, 0.5), (0.3, 0.5), (0.3, 0.5001), (1, 0.5001), (1, 1), (0, 1)]
    assert len(points_of(prongs)[0]) == 0


def test_sizes_are_multiples_of_the_width_along_the_channel():
    ring = [(0, 0), (1, 0), (1, 3e-4), (0, 1e-4)]
    places, sizes = points_of(ring)
    width = 1e-4 + 2e-4 * places[:, 0]
    assert sizes == pytest.approx(ASPECT * width, rel=0.05)
    for side in (places[:, 1] < 0.5 * width, places[:, 1] > 0.5 * width):
        along = np.sort(np.concatenate([[0], places[side, 0], [1]]))
        reached = ASPECT * (1e-4 + 2e-4 * along[1:])
        assert (np.diff(along) <= 1.1 * reached).all()


def test_a_sharp_corner_is_left_alone_near_its_vertex():
    """A needle of angle 1e-4: its tip is as flat as it must be, the rest is refined geometrically."""
    places, _ = points_of([(0, 0), (1, 0), (1, 1e-4)])
    assert places[:, 0].min() > 0.1
    assert 100 < len(places) < 500
    mesh = mesh_domain(SHAPES["needle"], size=0.25, target=1e-3)
    assert flatness(mesh).max() < 1.1e4
    far = mesh.points[mesh.cells][:, :, 0].min(axis=1) > 0.3
    assert far.sum() > 100
    assert flatness(mesh)[far].max() <= FLATTEST


def test_a_limit_gives_flatter_triangles_and_no_refusal():
    before = np.inf
    for most in (100, 1000, 10_000):
        mesh = mesh_domain(SHAPES["strip 1e-6"], size=0.25, target=1e-3, max_cells=most)
        check_mesh(mesh, SHAPES["strip 1e-6"])
        assert most / 50 < len(mesh.cells) <= most
        assert FLATTEST < flatness(mesh).max() < before / 3
        before = flatness(mesh).max()


def test_points_keep_to_their_limit():
    for limit in (1, 7, 300, 3000):
        count = len(points_of(strip(1e-7), limit=limit)[0])
        assert count <= limit
        assert count > limit / 5 or limit < 300
    assert len(points_of(strip(1e-7), limit=0)[0]) == 0


def test_layers_may_take_what_channels_would_need():
    """Both fit by themselves but not together: then the triangles are flatter."""
    teeth = domain(comb(10, 1e-5), conditions="dn" * 22)
    plain = len(mesh_domain(teeth, size=0.5, target=1e-8, max_cells=60_000).cells)
    limit = 2 * plain // 3
    mesh = mesh_domain(teeth, size=0.5, target=1e-8, max_cells=limit)
    assert len(mesh.cells) <= limit
    assert flatness(mesh).max() > FLATTEST


@settings(max_examples=15, deadline=None, derandomize=True)
@given(st.floats(-5.0, -2.0), st.floats(-5.0, -2.0), st.floats(0.0, 360.0), st.floats(0.05, 0.9), st.booleans())
def test_random_channels(one, other, degrees, place, opening):
    """Two squares joined by a tapering channel, turned by any angle."""
    low, high = 10.0**one, 10.0**other
    ring = [(0, 0), (1, 0), (1, place), (2, place), (2, 0), (3, 0), (3, 1), (2, 1)]
    ring += [(2, place + high), (1, place + low), (1, 1), (0, 1)]
    if opening:
        ring[4:8] = []
    mesh = mesh_domain(domain(turned(ring, degrees)), size=0.4, target=1e-2)
    check_mesh(mesh, domain(turned(ring, degrees)))
    assert flatness(mesh).max() <= FLATTEST
    assert len(mesh.cells) < 6000
