"""Sectors at the ends of interfaces, and the exponents that a domain gets from them."""

import numpy as np
import pytest
from meshing_shapes import SQUARE, domain
from region_shapes import REGIONS, box, checkerboard, with_regions

from service.meshing.outline import describe
from service.meshing.stars import find_stars
from service.meshing.vectors import cross


def stars_of(shape):
    return find_stars(shape.points, shape.edges, shape.interfaces, shape.part == 0)


def wedge(degrees: float, conditions: str):
    """A corner at vertex 0 with two equal sectors, the first of which is a region."""
    angle = np.radians([0, degrees, 2 * degrees])
    ring = np.vstack([[(0, 0)], np.column_stack([np.cos(angle), np.sin(angle)])])
    first, last = conditions
    return with_regions(domain(ring, conditions=f"{first}nn{last}"), first=[ring[:3]])


def exponents_at_the_corner(shape, contrast: float) -> np.ndarray:
    def diffusion(inside: np.ndarray) -> np.ndarray:
        return np.where(inside.any(axis=1), contrast, 1.0)

    row = describe(shape, 0.3, diffusion).exponents[0]
    return row[row < 2]


@pytest.mark.parametrize("contrast", [0.01, 3.0, 100.0])
def test_sectors_take_the_conditions_of_their_own_edges(contrast):
    """Two sectors of angle ω, κ in the first and 1 in the second.

    Dirichlet on the first ray, Neumann on the last one: κ cot αω = tan αω, α = arctan(√κ)/ω; the other
    way round κ tan αω = cot αω, α = arctan(1/√κ)/ω; and π minus these angles.
    """
    angle = np.radians(70)
    for conditions, turned in (("dn", np.arctan(np.sqrt(contrast))), ("nd", np.arctan(1 / np.sqrt(contrast)))):
        roots = np.array([turned, np.pi - turned]) / angle
        assert exponents_at_the_corner(wedge(70, conditions), contrast) == pytest.approx(roots[roots < 2], rel=1e-9)
    for conditions in ("dd", "nn"):
        roots = np.array([0.5, 1]) * np.pi / angle
        assert exponents_at_the_corner(wedge(70, conditions), contrast) == pytest.approx(roots[roots < 2], rel=1e-9)


def test_no_exponent_below_two_is_left_of_the_single_material():
    """Of one material the exponent would be 1.5; with a good conductor on the Dirichlet side it is nearly 3."""
    shape = wedge(30, "dn")
    assert exponents_at_the_corner(shape, 1.0) == pytest.approx([1.5])
    assert len(exponents_at_the_corner(shape, 1e6)) == 0
    outline = describe(shape, 0.3, lambda inside: np.where(inside.any(axis=1), 1e6, 1.0))
    assert outline.layers(np.full(len(shape.points), 0.3), 1e-12)[0] == 0


@pytest.mark.parametrize("name", REGIONS)
def test_sectors_go_all_round_or_from_edge_to_edge(name):
    shape = REGIONS[name]
    stars = stars_of(shape)
    assert np.array_equal(stars.vertices, np.unique(shape.interfaces))
    on_rim = np.isin(stars.vertices, shape.edges)
    assert np.array_equal(stars.closed, ~on_rim)
    ends = np.concatenate([shape.interfaces.ravel(), shape.edges.ravel()])
    rays = np.bincount(ends, minlength=len(shape.points))[stars.vertices]
    assert np.array_equal((stars.widths > 0).sum(axis=1), rays - on_rim)
    assert stars.widths[stars.closed].sum(axis=1) == pytest.approx(2 * np.pi)
    for star in np.flatnonzero(on_rim):
        vertex = stars.vertices[star]
        ahead = shape.points[shape.edges[shape.edges[:, 0] == vertex, 1][0]] - shape.points[vertex]
        back = shape.points[shape.edges[shape.edges[:, 1] == vertex, 0][0]] - shape.points[vertex]
        total = np.arctan2(cross(ahead, back), ahead @ back) % (2 * np.pi)
        assert stars.widths[star].sum() == pytest.approx(total)
        first = np.arctan2(cross(ahead, stars.middles[star, 0]), ahead @ stars.middles[star, 0])
        assert 2 * first % (2 * np.pi) == pytest.approx(stars.widths[star, 0])
    assert np.hypot(*np.moveaxis(stars.middles, -1, 0)) == pytest.approx(1.0)


def test_missing_sectors_repeat_the_last_one():
    stars = stars_of(checkerboard(2))
    assert stars.widths.shape == (5, 4)
    assert sorted((stars.widths > 0).sum(axis=1).tolist()) == [2, 2, 2, 2, 4]
    for width, middle in zip(stars.widths, stars.middles, strict=True):
        count = (width > 0).sum()
        assert (middle[count:] == middle[count - 1]).all()


def test_places_in_thin_sectors_and_near_other_segments_are_told_apart():
    """A film 10⁻⁶ wide, a spike of 10⁻⁴: κ in each sector is that of the triangles there."""
    for shape in (
        with_regions(domain(SQUARE), film=box(0.2, 0.4, 0.8, 0.4 + 1e-6)),
        with_regions(domain(SQUARE), spike=[[(0.2, 0.2), (0.9, 0.2), (0.9, 0.2 + 1e-4)]]),
    ):
        seen = []

        def diffusion(inside: np.ndarray, seen=seen) -> np.ndarray:
            seen.append(inside)
            return np.ones(len(inside))

        describe(shape, 0.3, diffusion)
        stars = stars_of(shape)
        inside = seen[0].reshape(stars.widths.shape)
        narrow = stars.widths.argmin(axis=1)
        assert np.take_along_axis(inside, narrow[:, None], axis=1).all()
        assert (inside.sum(axis=1) == 1).all()


def test_no_interfaces_no_stars():
    stars = stars_of(domain(SQUARE))
    assert stars.vertices.shape == (0,)
    assert stars.widths.shape == (0, 0)
