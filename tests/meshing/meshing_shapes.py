"""Plane domains for the meshing tests, and what must hold for every mesh of one."""

import numpy as np

from service.meshing.mesh import Mesh
from service.meshing.quality import volumes
from service.problem.domain import BoundaryPart, PlaneDomain

PARTS = (BoundaryPart("held", "dirichlet"), BoundaryPart("free", "neumann"))

SQUARE = [(0, 0), (1, 0), (1, 1), (0, 1)]
L_SHAPE = [(-1, -1), (0, -1), (0, 0), (1, 0), (1, 1), (-1, 1)]


def domain(*rings, conditions: str | None = None, components: int = 1) -> PlaneDomain:
    """Rings of points, the outer one first, and one letter d or n for each edge (default: all d)."""
    starts = np.cumsum([0] + [len(ring) for ring in rings])
    edges = [
        np.column_stack([np.arange(len(ring)), (np.arange(len(ring)) + 1) % len(ring)]) + start
        for ring, start in zip(rings, starts, strict=False)
    ]
    letters = conditions if conditions is not None else "d" * int(starts[-1])
    return PlaneDomain(
        points=np.concatenate([np.asarray(ring, dtype=np.float64) for ring in rings]),
        edges=np.vstack(edges).astype(np.int64),
        loops=np.repeat(np.arange(len(rings)), np.diff(starts)),
        part=np.array(["dn".index(letter) for letter in letters]),
        parts=PARTS,
        components=components,
    )


def strip(width: float) -> list[tuple[float, float]]:
    """The rectangle 1 × width."""
    return [(0, 0), (1, 0), (1, width), (0, width)]


def square_hole(x: float, y: float, side: float) -> list[tuple[float, float]]:
    """A clockwise square with lower left corner (x, y)."""
    return [(x, y), (x, y + side), (x + side, y + side), (x + side, y)]


def comb(teeth: int, width: float = 0.02) -> list[tuple[float, float]]:
    """A bar 1 × 0.2 with teeth of height 1 on top."""
    ring = [(0.0, -0.2), (1.0, -0.2), (1.0, 0.0)]
    for tooth in reversed(range(teeth)):
        left, right = (tooth + 0.5) / teeth - width / 2, (tooth + 0.5) / teeth + width / 2
        ring += [(right, 0.0), (right, 1.0), (left, 1.0), (left, 0.0)]
    return [*ring, (0.0, 0.0)]


def notched(degrees: float) -> list[tuple[float, float]]:
    """The unit square with a wedge cut out that leaves an interior angle at vertex 3, its centre."""
    half = 0.5 * np.tan(np.radians((360 - degrees) / 2))
    return [(0, 0), (1, 0), (1, 0.5 - half), (0.5, 0.5), (1, 0.5 + half), (1, 1), (0, 1)]


def shoreline(count: int) -> np.ndarray:
    """A wavy ring of ``count`` edges."""
    angle = 2 * np.pi * np.arange(count) / count
    radius = 1 + 0.2 * np.cos(3 * angle) + 0.01 * np.random.default_rng(1).standard_normal(count)
    return np.column_stack([radius * np.cos(angle), radius * np.sin(angle)])


def turned(ring, degrees: float) -> np.ndarray:
    """The ring rotated about the origin."""
    c, s = np.cos(np.radians(degrees)), np.sin(np.radians(degrees))
    return np.asarray(ring, dtype=np.float64) @ np.array([[c, s], [-s, c]])


SHAPES = {
    "square": domain(SQUARE),
    "square, one side held": domain(SQUARE, conditions="dnnn"),
    "L-shape": domain(L_SHAPE),
    "strip 1e-3": domain(strip(1e-3)),
    "strip 1e-6": domain(strip(1e-6)),
    "turned strip 1e-6": domain(turned(strip(1e-6), 31)),
    "comb": domain(comb(10)),
    "tiny hole": domain(SQUARE, square_hole(0.7, 0.6, 0.01)),
    "tiniest hole": domain(SQUARE, square_hole(0.7, 0.6, 1e-6)),
    "hole near the wall": domain(SQUARE, square_hole(1e-4, 0.3, 0.4)),
    "four holes": domain(SQUARE, *[square_hole(x, y, 0.1) for x in (0.2, 0.6) for y in (0.2, 0.7)]),
    "notch 359": domain(notched(359)),
    "segment held": domain([(0, 0), (0.3, 0), (0.6, 0), (1, 0), (1, 1), (0, 1)], conditions="ndnnnn"),
    "short segment held": domain([(0, 0), (0.495, 0), (0.4951, 0), (1, 0), (1, 1), (0, 1)], conditions="ndnnnn"),
    "needle": domain([(0, 0), (1, 0), (1, 1e-4)]),
    "shoreline": domain(shoreline(200)),
    "far away": domain(np.array(L_SHAPE) * 50 + 5e6),
}


def exact_area(shape: PlaneDomain) -> float:
    """Area by the shoelace formula about the first point."""
    start, end = (shape.points[shape.edges[:, i]] - shape.points[0] for i in (0, 1))
    return float((start[:, 0] * end[:, 1] - start[:, 1] * end[:, 0]).sum() / 2)


def orientations(mesh: Mesh) -> np.ndarray:
    """Sum over the cells at each facet of the sign with which the cell's boundary runs through it."""
    signs = np.sign(np.linalg.det(mesh.spans))[:, None] * np.array([1, -1, 1])
    total = np.zeros(len(mesh.facets))
    np.add.at(total, mesh.cell_facets, signs)
    return total


def perimeters(mesh: Mesh) -> np.ndarray:
    """Length of each boundary part in the user's unit, from the spans of the cells at it."""
    places = np.concatenate([np.zeros_like(mesh.spans[:, :, :1]), mesh.spans], axis=2)
    others = [(1, 2), (0, 2), (0, 1)]
    sides = np.stack([places[:, :, j] - places[:, :, i] for i, j in others], axis=1)
    length = np.hypot(sides[:, :, 0], sides[:, :, 1])
    part = mesh.part[mesh.cell_facets]
    return mesh.unit * np.array([length[part == number].sum() for number in range(len(PARTS))])


def check_mesh(mesh: Mesh, shape: PlaneDomain) -> None:
    """Everything a mesh of a plane domain promises, as far as floating point can tell."""
    assert (np.diff(mesh.cells, axis=1) > 0).all()
    assert (np.diff(mesh.facets, axis=1) > 0).all()
    assert np.array_equal(np.unique(mesh.cells), np.arange(len(mesh.points)))
    for corner in range(3):
        opposite = np.delete(mesh.cells, corner, axis=1)
        assert np.array_equal(mesh.facets[mesh.cell_facets[:, corner]], opposite)
    outside = mesh.facet_cells[:, 1] < 0
    for side in (0, 1):
        touched = np.flatnonzero(mesh.facet_cells[:, side] >= 0)
        cells = mesh.facet_cells[touched, side]
        assert (mesh.cell_facets[cells] == touched[:, None]).any(axis=1).all()
    assert (mesh.facet_cells[~outside, 0] != mesh.facet_cells[~outside, 1]).all()

    total = orientations(mesh)
    assert (total[~outside] == 0).all()
    assert (np.abs(total[outside]) == 1).all()
    assert np.array_equal(outside, mesh.part >= 0)
    euler = len(mesh.points) - len(mesh.facets) + len(mesh.cells)
    assert euler == 2 - len(np.unique(shape.loops))

    area = exact_area(shape)
    diameter = np.ptp(shape.points, axis=0).max()
    assert abs(volumes(mesh).sum() * mesh.unit**2 - area) <= 1e-12 * area + 1e-14 * diameter**2
    length = np.hypot(*(shape.points[shape.edges[:, 1]] - shape.points[shape.edges[:, 0]]).T)
    wanted = np.bincount(shape.part, length, minlength=len(PARTS))
    assert np.allclose(perimeters(mesh), wanted, rtol=1e-11, atol=1e-13 * diameter)

    corners = mesh.points[mesh.cells]
    differences = (corners[:, 1:] - corners[:, :1]).swapaxes(1, 2)
    assert np.abs(differences - mesh.spans).max() < 4e-15
    assert 0 < mesh.shape_error < 1e-3
