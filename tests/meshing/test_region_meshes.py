"""Meshes of domains with regions: conforming, exact, of the right areas, graded where materials meet."""

import subprocess
import sys
from dataclasses import replace
from fractions import Fraction
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st
from meshing_shapes import L_SHAPE, SHAPES, SQUARE, check_mesh, domain, shoreline, square_hole, strip, turned
from region_shapes import (
    REGIONS,
    box,
    check_regions,
    checkerboard,
    interface_facets,
    polygon,
    with_regions,
)
from test_mesh_determinism import fingerprint

from service.errors import ComputationError
from service.meshing.cover import check_cover
from service.meshing.generate import displacements, mesh_domain
from service.meshing.grade import grade
from service.meshing.outline import describe
from service.meshing.quality import flatness, longest_edges
from service.meshing.refine import refine
from service.meshing.sizing import size_function, subdivide
from service.meshing.triangulation import Triangulation, base_spans


def alternating(inside: np.ndarray) -> np.ndarray:
    """1000 inside an odd number of regions, otherwise 1."""
    return np.where(inside.sum(axis=1) % 2 == 1, 1000.0, 1.0)


def contrast(value: float):
    """``value`` inside any region, otherwise 1."""
    return lambda inside: np.where(inside.any(axis=1), value, 1.0)


def interface_length(shape) -> float:
    ends = shape.points[shape.interfaces]
    return float(np.hypot(*(ends[:, 1] - ends[:, 0]).T).sum())


def smallest_at(mesh, vertex: int) -> float:
    """Longest edge of the cells at a vertex, the largest of them."""
    return float(longest_edges(mesh)[(mesh.cells == vertex).any(axis=1)].max())


def moved(shape, motion):
    """The domain with its points and the rings of its regions moved."""
    regions = [replace(region, rings=tuple(map(motion, region.rings))) for region in shape.regions]
    return replace(shape, points=motion(shape.points), regions=tuple(regions))


def vertex_at(shape, x: float, y: float) -> int:
    (found,) = np.flatnonzero(np.abs(shape.points - [x, y]).max(axis=1) < 1e-9)
    return int(found)


@pytest.mark.parametrize("name", REGIONS)
@pytest.mark.parametrize("diffusion", [None, alternating])
def test_regions_are_covered_and_the_mesh_is_whole(name, diffusion):
    shape = REGIONS[name]
    mesh = mesh_domain(shape, size=0.3, target=1e-5, diffusion=diffusion)
    check_mesh(mesh, shape)
    check_regions(mesh, shape)
    assert flatness(mesh).max() <= 200
    between = interface_facets(mesh)
    ends = mesh.points[mesh.facets[between]] * mesh.unit + np.array(mesh.origin)
    length = np.hypot(*(ends[:, 1] - ends[:, 0]).T).sum()
    assert length == pytest.approx(interface_length(shape), rel=1e-12)
    lines = shapely.unary_union([polygon(region.rings).boundary for region in shape.regions])
    assert shapely.distance(lines, shapely.points(ends.reshape(-1, 2))).max(initial=0.0) < 1e-12


@pytest.mark.parametrize(
    ("name", "plain", "graded"),
    [
        ("half", 60, 60),
        ("L in a square", 80, 500),
        ("island", 80, 300),
        ("triple point", 60, 120),
        ("checkerboard 2", 60, 600),
        ("corner on the wall", 60, 800),
        ("thin", 450, 500),
        ("everywhere", 40, 40),
    ],
)
def test_meshes_with_regions_are_small(name, plain, graded):
    assert len(mesh_domain(REGIONS[name], size=0.3, target=1e-5).cells) <= plain
    assert len(mesh_domain(REGIONS[name], size=0.3, target=1e-5, diffusion=alternating).cells) <= graded


def test_equal_diffusion_changes_nothing():
    for name in ("crossing", "corner in the corner"):
        plain = mesh_domain(REGIONS[name], size=0.3, target=1e-6)
        equal = mesh_domain(REGIONS[name], size=0.3, target=1e-6, diffusion=contrast(1.0))
        assert fingerprint(plain) == fingerprint(equal)


def test_a_domain_without_regions_takes_any_diffusion():
    mesh = mesh_domain(SHAPES["L-shape"], size=0.3, target=1e-5, diffusion=contrast(7.0))
    assert fingerprint(mesh) == fingerprint(mesh_domain(SHAPES["L-shape"], size=0.3, target=1e-5))
    assert mesh.regions.shape == (len(mesh.cells), 0)


def test_the_diffusion_decides_the_depth():
    """α = (4/π) arctan(1/√κ) at the centre: the layers are those of that exponent, down to 1e-14."""
    shape = checkerboard(2)
    centre = vertex_at(shape, 0.5, 0.5)
    plain = smallest_at(mesh_domain(shape, size=0.3, target=1e-6), centre)
    layers = []
    for value in (1.0, 1.5, 3.0, 10.0, 1e3, 1e6, 1e12):
        mesh = mesh_domain(shape, size=0.3, target=1e-6, diffusion=contrast(value))
        check_mesh(mesh, shape)
        assert flatness(mesh).max() < 10
        layers.append(np.log(plain / smallest_at(mesh, centre)) / np.log(4))
    assert layers[0] == 0
    assert all(a < b for a, b in pairwise(layers[:5]))
    assert layers[-3:] == [layers[-1]] * 3
    assert 1e-14 / 4 < smallest_at(mesh, centre) < 1e-13


def test_corners_of_a_region_are_graded_like_corners_of_a_domain():
    """Contrast 10⁸ around a re-entrant corner: outside there is nearly a Neumann condition, α = 2/3."""
    inner = with_regions(domain(4 * np.array(SQUARE) - 2), bend=[np.array(L_SHAPE)])
    vertex = vertex_at(inner, 0, 0)
    mesh = mesh_domain(inner, size=0.2, target=1e-6, diffusion=contrast(1e-8))
    assert smallest_at(mesh, vertex) < 0.01 * smallest_at(mesh_domain(inner, size=0.2, target=1e6), vertex)
    assert len(np.unique(mesh.regions[(mesh.cells == vertex).any(axis=1)])) == 2


def test_only_singular_points_are_graded():
    """Where a straight interface goes on or meets a wall at a right angle nothing is."""
    shape = with_regions(domain([(0, 0), (0.5, 0), (1, 0), (1, 1), (0, 1)]), left=box(0, 0, 0.5, 1))
    mesh = mesh_domain(shape, size=0.3, target=1e-9, diffusion=alternating)
    assert fingerprint(mesh) == fingerprint(mesh_domain(shape, size=0.3, target=1e-9))
    slanted = with_regions(domain(SQUARE), left=[[(0, 0), (0.5, 0), (0.7, 1), (0, 1)]])
    assert len(mesh_domain(slanted, size=0.3, target=1e-6, diffusion=alternating).cells) > len(
        mesh_domain(slanted, size=0.3, target=1e-6).cells
    )


def test_many_singular_points_get_shallow_layers_rather_than_no_mesh():
    shape = checkerboard(8)
    full = len(mesh_domain(shape, size=0.3, target=1e-6, diffusion=contrast(1e6)).cells)
    assert full > 12_000
    for most in (10_000, 3000, 1000):
        mesh = mesh_domain(shape, size=0.3, target=1e-6, diffusion=contrast(1e6), max_cells=most)
        check_mesh(mesh, shape)
        assert most / 4 < len(mesh.cells) <= most
    with pytest.raises(ComputationError) as caught:
        mesh_domain(shape, size=0.3, target=1e-6, diffusion=contrast(1e6), max_cells=200)
    assert caught.value.kind == "mesh-too-large"


def test_layers_all_round_round_nothing():
    corners = np.array([[0.1, 0.2], [0.9, 0.1], [0.8, 0.7], [0.2, 0.9], [0.47, 0.51]])
    cells = np.array([[0, 1, 4], [1, 2, 4], [2, 3, 4], [3, 0, 4]])
    rim = np.array([[0, 1], [1, 2], [2, 3], [3, 0]])
    spans, error = base_spans(corners, cells, np.zeros((5, 2)))
    inside = np.array([[True, False], [False, False], [True, True], [False, False]])
    base = Triangulation(corners, cells, spans, error, rim, np.arange(4), inside)
    fan = grade(base, np.array([0, 0, 0, 0, 40]))
    assert len(fan.cells) == 4 * 81

    def areas(mesh):
        exact = np.vectorize(Fraction, otypes=[object])(mesh.spans)
        return exact[:, 0, 0] * exact[:, 1, 1] - exact[:, 0, 1] * exact[:, 1, 0]

    assert (areas(fan) > 0).all()
    for row, area in zip(inside[[0, 2, 1]], [areas(base)[0], areas(base)[2], areas(base)[[1, 3]].sum()], strict=True):
        assert areas(fan)[(fan.regions == row).all(axis=1)].sum() == area


def test_refinement_inherits_regions():
    for name in ("crossing", "thin", "checkerboard 2"):
        mesh = mesh_domain(REGIONS[name], size=0.5, target=1e-4, diffusion=alternating)
        fine = refine(mesh)
        check_mesh(fine, REGIONS[name])
        check_regions(fine, REGIONS[name])
        assert interface_facets(fine).sum() == 2 * interface_facets(mesh).sum()


def test_inner_points_of_interfaces_are_within_their_allowance():
    """Distance of their vertices to the true straight interface, exactly, against the displacement."""
    shape = with_regions(
        domain(turned(SQUARE, 17) + 1 / 3), band=[turned([(0.2, 0.1), (0.9, 0.3), (0.7, 0.8)], 17) + 1 / 3]
    )
    mesh = mesh_domain(shape, size=0.05, target=1e6)
    exact = np.vectorize(Fraction, otypes=[object])
    true = (exact(shape.points) - exact(np.array(mesh.origin))) / Fraction(mesh.unit)
    places = exact(mesh.points)
    seen = 0
    for start, end in shape.interfaces:
        along, across = true[end] - true[start], places - true[start]
        distance = across[:, 0] * along[1] - across[:, 1] * along[0]
        distance = np.abs(distance.astype(np.float64)) / np.hypot(*along.astype(np.float64))
        share = (across @ along / (along @ along)).astype(np.float64)
        on = (distance < 1e-12) & (share > 0) & (share < 1)
        seen += on.sum()
        allowed = 5 * 2.0**-53 * np.hypot(*np.maximum(true[start], true[end]).astype(np.float64))
        assert 0 < distance[on].max() <= allowed
    assert seen > 10


def test_the_shape_error_covers_the_true_triangles_at_interfaces():
    """Vertices of the region are the given points, inner ones are where the mesh says."""
    shape = with_regions(domain(5 * np.array(SQUARE) - 2), island=[shoreline(100)])
    shape = moved(shape, lambda points: turned(points, 20))
    mesh = mesh_domain(shape, size=0.3, target=1e6)
    exact = np.vectorize(Fraction, otypes=[object])
    true = exact(mesh.points)
    true[: len(shape.points)] = (exact(shape.points) - exact(np.array(mesh.origin))) / Fraction(mesh.unit)
    known = np.ones(len(mesh.points), dtype=bool)
    known[mesh.facets[(mesh.part >= 0) | interface_facets(mesh)]] = False
    known[: len(shape.points)] = True
    chosen = known[mesh.cells].all(axis=1) & (mesh.cells < len(shape.points)).any(axis=1)
    assert chosen.sum() > 100
    worst = 0.0
    for cell, spans in zip(mesh.cells[chosen], mesh.spans[chosen], strict=True):
        error = ((true[cell[1:]] - true[cell[0]]).T - exact(spans)).astype(np.float64)
        worst = max(worst, float(np.linalg.norm(error @ np.linalg.inv(spans), 2)))
    assert 0 < worst <= mesh.shape_error
    assert mesh.shape_error < 1000 * worst


def test_displacements_of_interfaces_are_bounded_like_those_of_edges():
    shape = REGIONS["corner on the wall"]
    segments = np.vstack([shape.edges, shape.interfaces])
    sizes = size_function(shape.points, np.full(len(shape.points), 0.1), 0.1)
    cut = subdivide(shape.points, segments, sizes, np.ones(len(segments), dtype=np.int64))
    allowed = displacements(cut, shape.points, segments, len(cut.points) + 2, shape.hosts)
    inner = cut.host >= len(shape.edges)
    assert inner.sum() > 10
    start, end = shape.points[segments[cut.host[inner]]].swapaxes(0, 1)
    limit = allowed[len(shape.points) : -2][inner]
    assert (limit >= 4 * 2.0**-53 * np.maximum(start, end)).all()
    assert (limit <= 6 * 2.0**-53 * np.maximum(start, end)).all()


def test_regions_deep_inside_a_body_far_away():
    """Coordinates near 5e6, where one unit in the last place is 1e-9."""
    shift = np.array([5e6, 5e6])
    near = with_regions(domain(64 * np.array(SQUARE)), island=box(16, 16, 32, 48))
    far = moved(near, lambda points: points + shift)
    one, two = (mesh_domain(shape, size=0.2, target=1e-5, diffusion=alternating) for shape in (near, far))
    assert np.array_equal(one.spans, two.spans)
    assert np.array_equal(one.regions, two.regions)


def test_same_bits_again_and_in_another_process():
    names = ("checkerboard 8", "slanted", "thin")
    first = [region_digest(name) for name in names]
    assert [region_digest(name) for name in reversed(names)] == first[::-1]
    here = Path(__file__).parent
    code = (
        f"import sys; sys.path[:0] = [{str(here)!r}, {str(here.parents[1])!r}]; "
        f"from test_region_meshes import region_digest; print(*map(region_digest, {names!r}))"
    )
    fresh = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert fresh.stdout.split() == first


def region_digest(name: str) -> str:
    return fingerprint(mesh_domain(REGIONS[name], size=0.2, target=1e-4, diffusion=alternating))


def test_outlines_without_interfaces_are_noticed():
    shape = REGIONS["half"]
    assert len(shape.interfaces) == 1
    with pytest.raises(ValueError, match="'left' does not consist of interfaces"):
        mesh_domain(replace(shape, interfaces=shape.interfaces[:0]), size=0.3, target=1e-3)
    other = replace(shape.regions[0], rings=(shape.regions[0].rings[0] * [1 + 1e-6, 1],))
    with pytest.raises(ValueError, match="'left' does not consist of interfaces"):
        mesh_domain(replace(shape, regions=(other,)), size=0.3, target=1e-3)


def test_triangles_across_an_interface_are_noticed():
    """Two triangles of the square, which lack the other diagonal."""
    shape = replace(domain(SQUARE), interfaces=np.array([[1, 3]]))
    outline = describe(shape, 0.5, None)
    cells = np.array([[0, 1, 2], [0, 2, 3]])
    spans, error = base_spans(outline.points, cells, np.zeros((4, 2)))
    base = Triangulation(outline.points, cells, spans, error, shape.edges, shape.part)
    check_cover(base, outline, np.array([[2, 0]]))
    with pytest.raises(ComputationError, match="outlines of regions"):
        check_cover(base, outline, outline.interfaces)


def test_points_without_use_are_refused():
    shape = replace(domain(SQUARE), points=np.vstack([SQUARE, [(0.5, 0.5)]]).astype(np.float64))
    with pytest.raises(ValueError, match="every point must be used"):
        mesh_domain(shape, size=0.3, target=1e-3)


@pytest.mark.parametrize("value", [0.0, -1.0, np.nan, np.inf])
def test_diffusion_must_be_positive(value):
    with pytest.raises(ValueError, match="positive"):
        mesh_domain(REGIONS["half"], size=0.3, target=1e-3, diffusion=contrast(value))


def test_an_interface_that_touches_an_edge_between_vertices_is_refused():
    shape = domain(SQUARE)
    touching = replace(
        shape,
        points=np.vstack([shape.points, [(0.5, 0.0), (0.5, 0.5), (0.6, 0.5)]]),
        interfaces=np.array([[4, 5], [5, 6], [6, 4]]),
    )
    with pytest.raises(ComputationError) as caught:
        mesh_domain(touching, size=0.3, target=1e-3)
    assert caught.value.kind == "meshing-failed"


def random_shape(seed: int):
    """One of five domains with up to four random regions: boxes, turned boxes, star-shaped rings."""
    generator = np.random.default_rng(seed)
    bases = [
        domain(SQUARE),
        domain(L_SHAPE),
        domain(SQUARE, square_hole(0.4, 0.4, 0.2)),
        domain(strip(0.05)),
        domain(shoreline(60)),
    ]
    base = bases[generator.integers(len(bases))]
    low, high = base.points.min(axis=0), base.points.max(axis=0)
    regions = {}
    for number in range(generator.integers(1, 5)):
        extent = (high - low) * 10 ** generator.uniform(-2.5, -0.1, 2)
        corners = np.array([(-1, -1), (1, -1), (1, 1), (-1, 1)]) * extent
        kind = generator.integers(3)
        if kind == 1:
            corners = turned(corners, generator.uniform(0, 360))
        elif kind == 2:
            gaps = generator.uniform(0.3, 1.0, generator.integers(3, 12))
            angle = 2 * np.pi * np.cumsum(gaps) / gaps.sum()
            radius = generator.uniform(0.3, 1.0, len(gaps)) * extent.max()
            corners = np.column_stack([radius * np.cos(angle), radius * np.sin(angle)])
        regions[f"region {number}"] = [corners + generator.uniform(low, high)]
    return with_regions(base, **regions)


def check_random(seed: int, size: float, target: float) -> None:
    shape = random_shape(seed)

    def diffusion(inside: np.ndarray) -> np.ndarray:
        return 10.0 ** (inside @ np.arange(1, inside.shape[1] + 1) * 1.5)

    mesh = mesh_domain(shape, size=size, target=target, diffusion=diffusion if seed % 2 else None)
    check_mesh(mesh, shape)
    check_regions(mesh, shape)
    assert len(mesh.cells) < 60_000


@settings(max_examples=40, deadline=None, derandomize=True)
@given(st.integers(0, 10**6), st.floats(0.05, 0.6), st.sampled_from([1e-2, 1e-4, 1e-7]))
def test_random_regions(seed, size, target):
    check_random(seed, size, target)


@pytest.mark.slow
@settings(max_examples=400, deadline=None, derandomize=True)
@given(st.integers(10**6, 10**7), st.floats(0.05, 0.6), st.sampled_from([1e-2, 1e-4, 1e-7]))
def test_many_random_regions(seed, size, target):
    check_random(seed, size, target)
