"""Constants weighted by a diffusion tensor, on the unit square."""

import mpmath
import numpy as np
import pytest
from pencils import boundary, centres, ratio, square_mesh, weighted

from service.forms.form import Pencil
from service.meshing.mesh import Mesh

WIDTH = 1.9e-6
"""Relative width of the ratio; the constant, its inverse root, is half as wide."""

# Anjam and Pauly, arXiv 1809.04577, Theorem 2.2 and Table 1: C_F as printed there, to five digits.
ANISOTROPIC = {1e-4: 0.31829, 1e-2: 0.31673, 1.0: 0.22508, 1e2: 0.03167}


@pytest.mark.parametrize("delta", ANISOTROPIC)
def test_anisotropic_diffusion(delta: float) -> None:
    """K = diag(1, delta), zero all round: C_F = 1 / (pi sqrt(1 + delta)), closed form and printed table."""

    def pencil(mesh: Mesh) -> Pencil:
        return weighted(mesh, np.diag([1.0, delta]), boundary(mesh))

    # Rows of cells as narrow in the metric of K as they are wide.
    found = ratio(pencil, 1, WIDTH, lambda size: square_mesh(size, delta**-0.5)).inverse_root()
    with mpmath.workdps(40):
        exact = 1 / (mpmath.pi * mpmath.sqrt(1 + mpmath.mpf(delta)))
        lower, upper = mpmath.mpf(found.lower), mpmath.mpf(found.upper)
        assert lower <= exact <= upper
        assert (upper - lower) / upper <= 1e-6
    assert found.lower - 6e-6 <= ANISOTROPIC[delta] <= found.upper + 6e-6


def layered(mesh: Mesh, second: float) -> Pencil:
    """K = 1 for x < 1/2 and ``second`` beyond; zero at x = 0 and x = 1, free at the top and the bottom."""
    diffusion = np.where(centres(mesh)[:, 0] < 0.5, 1.0, second)
    sides = np.ptp(mesh.points[mesh.facets, 0], axis=1) == 0
    return weighted(mesh, diffusion[:, None, None] * np.eye(2), boundary(mesh) & sides)


def layered_root(second: float) -> mpmath.mpf:
    """lambda = s^2 of the interval with K = 1 and then ``second``: elementary, s the smallest root."""
    root = mpmath.sqrt(second)

    def mismatch(s: mpmath.mpf) -> mpmath.mpf:
        left, right = s / 2, s / (2 * root)
        return mpmath.cos(left) * mpmath.sin(right) + root * mpmath.cos(right) * mpmath.sin(left)

    step = mpmath.mpf("0.01")
    start = step
    while mismatch(start) * mismatch(start + step) > 0:
        start += step
    return mpmath.findroot(mismatch, (start, start + step), solver="anderson") ** 2


def test_the_elementary_root_is_the_listed_one() -> None:
    """30.85574276069 for K = 1 | 10, as listed among the project's check values (elementary)."""
    with mpmath.workdps(40):
        assert abs(layered_root(10.0) - mpmath.mpf("30.85574276069")) < 1e-11


@pytest.mark.parametrize("second", [10.0, 0.01])
def test_two_layers(second: float) -> None:
    """Functions that vary along the layers have more energy than their means: the interval's root comes first."""
    found = ratio(lambda mesh: layered(mesh, second), 1, WIDTH)
    with mpmath.workdps(40):
        exact = layered_root(second)
        assert mpmath.mpf(found.lower) <= exact <= mpmath.mpf(found.upper)
    constant = found.inverse_root()
    assert constant.width <= 1e-6


@pytest.mark.parametrize("index", [2, 3, 4])
def test_higher_ratios_of_the_square(index: int) -> None:
    """Zero all round: 2 pi^2, then 5 pi^2 twice, then 8 pi^2 (closed form)."""
    exact = {2: 5, 3: 5, 4: 8}[index]

    def pencil(mesh: Mesh) -> Pencil:
        return weighted(mesh, np.eye(2), boundary(mesh))

    found = ratio(pencil, index, WIDTH)
    with mpmath.workdps(40):
        assert mpmath.mpf(found.lower) <= exact * mpmath.pi**2 <= mpmath.mpf(found.upper)
