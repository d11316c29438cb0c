"""Enclosures against another finite-element library: NGSolve, geometric refinement and high order, five domains.

Its Ritz value is an upper bound of the ratio up to rounding, hence its constant a lower bound of ours; how far below
the true one it lies, it estimates itself from two more orders.
"""

import math
from collections.abc import Callable, Sequence

import numpy as np
import pytest
from asking import ALL_ROUND, FREE, JSON, along, ask, enclosure, held, polygon
from netgen.geom2d import SplineGeometry
from ngsolve import H1, BilinearForm, Mesh, dx, grad
from plane_shapes import SQUARE, Ring, comb, notched, square_hole
from scipy.sparse import coo_matrix
from scipy.sparse.linalg import eigsh

L_SHAPE: Ring = [(0, 0), (0, -1), (1, -1), (1, 1), (-1, 1), (-1, 0)]

BASIN: Ring = [(0, 0), (95, 0), (140, 30), (140, 80), (85, 80), (85, 55), (0, 55), (0, 38), (0, 18)]
"""A retention basin, flowing in through the edge between its last two vertices (invented)."""

ISLAND: Ring = [(35, 20), (50, 18), (54, 30), (40, 36)]

TOLERANCE = 1e-6

ORDER = 7

LAYERS = 12
"""Geometric layers at every vertex."""

ROUNDING = 1e-10
"""Relative; what assembly and the eigenvalue solver of the other library may lose."""

Held = Callable[[int, int], bool]


def nowhere(ring: int, edge: int) -> bool:
    return False


def everywhere(ring: int, edge: int) -> bool:
    return True


# Rings, boundary parts for the service, held edges for the other library, constant.
Case = tuple[Sequence[Ring], list[JSON], Held, str]

CASES: dict[str, Case] = {
    "L-shape": ([L_SHAPE], ALL_ROUND, everywhere, "friedrichs"),
    "corner of 359 degrees, free": ([notched(359)], FREE, nowhere, "poincare"),
    "comb of three teeth, held below": (
        [comb(3)],
        held(along((0, -0.2), (1, -0.2))),
        lambda ring, edge: edge == 0,
        "friedrichs",
    ),
    "basin with an island": (
        [BASIN, ISLAND],
        held(along((0, 38), (0, 18))),
        lambda ring, edge: ring == 0 and edge == 7,
        "friedrichs",
    ),
    "square held on a hole": (
        [SQUARE, square_hole(0.55, 0.3, 0.125)],
        held({"box": [[0.5, 0.25], [0.7, 0.45]]}),
        lambda ring, edge: ring == 1,
        "friedrichs",
    ),
}


def other_mesh(rings: Sequence[Ring], holds: Held) -> Mesh:
    """The domain in the other library, refined geometrically toward every vertex."""
    geometry = SplineGeometry()
    for ring_number, ring in enumerate(rings):
        area = sum(x0 * y1 - x1 * y0 for (x0, y0), (x1, y1) in zip(ring, ring[1:] + ring[:1], strict=True))
        corners = [geometry.AppendPoint(x, y, hpref=1) for x, y in ring]
        inside = 1 if (area > 0) == (ring_number == 0) else 0
        for edge, start in enumerate(corners):
            geometry.Append(
                ["line", start, corners[(edge + 1) % len(corners)]],
                leftdomain=inside,
                rightdomain=1 - inside,
                bc="held" if holds(ring_number, edge) else "free",
            )
    spread = np.ptp(np.concatenate([np.asarray(ring) for ring in rings]), axis=0).max()
    mesh = Mesh(geometry.GenerateMesh(maxh=float(spread) / 4))
    mesh.RefineHP(LAYERS, 0.2)
    return mesh


def other_ratio(mesh: Mesh, order: int, index: int) -> float:
    """The index-th discrete eigenvalue of one order."""
    space = H1(mesh, order=order, dirichlet="held")
    u, v = space.TnT()
    stiffness = BilinearForm(grad(u) * grad(v) * dx).Assemble()
    mass = BilinearForm(u * v * dx).Assemble()
    free = np.flatnonzero(np.array(list(space.FreeDofs())))
    matrices = []
    for form in (stiffness, mass):
        rows, columns, values = form.mat.COO()
        shape = (space.ndof, space.ndof)
        matrix = coo_matrix((np.array(values), (np.array(rows), np.array(columns))), shape=shape)
        matrices.append(matrix.tocsc()[free][:, free])
    scale = matrices[0].diagonal().sum() / matrices[1].diagonal().sum()
    values = eigsh(matrices[0], index + 1, matrices[1], sigma=-1e-3 * scale, return_eigenvectors=False)
    return float(np.sort(values)[index - 1])


SLOW = ("comb of three teeth, held below", "basin with an island")


@pytest.mark.parametrize(
    "name", [pytest.param(name, marks=pytest.mark.slow) if name in SLOW else name for name in CASES]
)
def test_enclosure_agrees_with_another_library(name: str) -> None:
    rings, boundary, holds, constant = CASES[name]
    answer = ask(polygon(*rings), boundary, TOLERANCE)
    lower, upper = enclosure(answer, constant, TOLERANCE)
    mesh = other_mesh(rings, holds)
    index = 1 if constant == "friedrichs" else 2
    ratio, better = (other_ratio(mesh, order, index) for order in (ORDER, ORDER + 2))
    # Of the constant, an inverse root, half as much.
    error = abs(ratio - better) / better / 2 + ROUNDING
    assert error < TOLERANCE / 10, "the other library has not converged"
    value = 1 / math.sqrt(better)
    assert value * (1 - ROUNDING) <= upper
    assert lower <= value * (1 + error)
