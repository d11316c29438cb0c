"""Singular exponents where materials meet, against closed forms and a dense eigenvalue problem on the circle."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.linalg import eigh

from service.meshing.transmission import transmission_exponents

RIGHT = np.pi / 2


def exponents(widths, diffusion, *, closed=False, held=(True, True)) -> np.ndarray:
    """Exponents below 2 at one vertex."""
    (row,) = transmission_exponents(
        np.array([widths], dtype=float), np.array([diffusion], dtype=float), np.array([closed]), np.array([held])
    )
    assert (np.diff(row) >= 0).all()
    return row[row < 2]


def dense(widths, diffusion, *, closed=False, held=(True, True)) -> np.ndarray:
    """√λ < 2, λ > 0, of −(κΦ')' = λκΦ by polynomials of degree 12 on each half sector."""
    degree = 12
    nodes = np.cos(np.pi * np.arange(degree, -1, -1) / degree)
    x, weight = np.polynomial.legendre.leggauss(degree + 1)
    vandermonde = np.polynomial.chebyshev.chebvander(nodes, degree)
    value = np.linalg.solve(vandermonde.T, np.polynomial.chebyshev.chebvander(x, degree).T)
    slopes = [np.polynomial.chebyshev.chebval(x, np.polynomial.chebyshev.chebder(row)) for row in np.eye(degree + 1)]
    slope = np.linalg.solve(vandermonde.T, np.array(slopes))
    halves, kappa = np.repeat(np.asarray(widths) / 2, 2), np.repeat(diffusion, 2)
    size = degree * len(halves) + 1
    stiffness, mass = np.zeros((size, size)), np.zeros((size, size))
    for number, (width, k) in enumerate(zip(halves, kappa, strict=True)):
        here = slice(degree * number, degree * (number + 1) + 1)
        stiffness[here, here] += k * 2 / width * (slope * weight) @ slope.T
        mass[here, here] += k * width / 2 * (value * weight) @ value.T
    if closed:
        glue = np.vstack([np.eye(size - 1), np.eye(size - 1)[:1]])
    else:
        kept = [i for i in range(size) if not ((i == 0 and held[0]) or (i == size - 1 and held[1]))]
        glue = np.eye(size)[:, kept]
    scale = 1 / np.sqrt(np.diag(glue.T @ mass @ glue))
    stiffness, mass = (scale[:, None] * (glue.T @ matrix @ glue) * scale for matrix in (stiffness, mass))
    roots = np.sqrt(np.maximum(eigh(stiffness, mass, eigvals_only=True), 0))
    zero_mode = closed or not any(held)
    roots = roots[1:] if zero_mode else roots
    return roots[roots < 2 - 1e-6]


@pytest.mark.parametrize("contrast", [1.0, 2.0, 10.0, 1e3, 1e6, 1e9])
def test_checkerboard(contrast):
    """Quadrants κ, 1, κ, 1. Over two of them T has trace 2c² − (κ + 1/κ)s², c = cos απ/2, s = sin απ/2.

    u(−x) = −u(x) where the trace is −2: 4 = (√κ + 1/√κ)² s², α = (4/π) arctan(1/√κ) or 2 minus that.
    """
    found = exponents([RIGHT] * 4, [contrast, 1, contrast, 1], closed=True)
    smallest = 4 / np.pi * np.arctan(1 / np.sqrt(contrast))
    assert found == pytest.approx([smallest, 2 - smallest], rel=1e-7)


def test_one_material_has_the_exponents_of_the_laplacian():
    for angle in (0.4, RIGHT, 2.0, np.pi, 1.5 * np.pi, 6.2):
        for held, first in (((True, True), 1), ((False, False), 1), ((True, False), 0.5), ((False, True), 0.5)):
            expected = (first + np.arange(9)) * np.pi / angle
            for widths in ([angle], [0.3 * angle, 0.7 * angle], [0.1 * angle, 0.2 * angle, 0.7 * angle]):
                found = exponents(widths, [5.0] * len(widths), held=held)
                assert found == pytest.approx(expected[expected < 2 - 1e-6], rel=1e-12)
    assert exponents([1.0, 2 * np.pi - 1], [3.0, 3.0], closed=True).tolist() == [1.0, 1.0]


@pytest.mark.parametrize("contrast", [1e-6, 0.1, 3.0, 1e6])
def test_a_straight_interface_is_not_singular(contrast):
    assert exponents([np.pi, np.pi], [contrast, 1], closed=True).tolist() == [1.0, 1.0]
    assert exponents([0.3, np.pi, np.pi - 0.3], [1, contrast, 1], closed=True).tolist() == [1.0, 1.0]
    # At right angles to a straight boundary the reflection continues the solution.
    assert exponents([RIGHT, RIGHT], [contrast, 1]).tolist() == [1.0]
    assert exponents([RIGHT, RIGHT], [contrast, 1], held=(False, False)).tolist() == [1.0]


def test_large_contrasts_decouple_the_sectors():
    """The better conductor sees a Neumann, the other one a Dirichlet condition."""
    for angle in (1.0, RIGHT, 4.0):
        for widths, diffusion in (([angle, 2 * np.pi - angle], [1e10, 1]), ([2 * np.pi - angle, angle], [1, 1e10])):
            found = exponents(widths, diffusion, closed=True)
            limits = np.sort(np.outer([1, 2, 3], [np.pi / angle, np.pi / (2 * np.pi - angle)]).ravel())
            assert found == pytest.approx(limits[limits < 2], abs=1e-4)


def test_two_sectors_between_walls():
    """Dirichlet on both walls: κ₁ cot αω₁ + κ₂ cot αω₂ = 0."""
    for one, two, contrast in [(1.0, 2.0, 5.0), (3.0, 2.5, 100.0), (0.5, 5.0, 0.01)]:
        found = exponents([one, two], [contrast, 1])
        assert len(found) >= 1
        balance = contrast * np.cos(found * one) * np.sin(found * two) + np.cos(found * two) * np.sin(found * one)
        assert np.abs(balance).max() < 1e-9 * max(1.0, contrast)


sectors = st.lists(st.tuples(st.floats(0.05, 1.0), st.floats(-2.0, 2.0)), min_size=1, max_size=6)


@settings(max_examples=60, deadline=None, derandomize=True)
@given(sectors, st.booleans(), st.booleans(), st.booleans(), st.floats(0.5, 2 * np.pi))
def test_against_the_dense_eigenvalue_problem(pieces, closed, first, last, angle):
    share, power = np.array(pieces).T
    widths = (2 * np.pi if closed else angle) * share / share.sum()
    kappa = 10.0**power
    found = exponents(widths, kappa, closed=closed, held=(first, last))
    expected = dense(widths, kappa, closed=closed, held=(first, last))
    assert found[found < 2 - 1e-6] == pytest.approx(expected, rel=1e-5)


@settings(max_examples=20, deadline=None, derandomize=True)
@given(sectors, st.integers(0, 5), st.floats(-8.0, 8.0))
def test_where_the_ring_begins_does_not_matter_nor_the_unit(pieces, shift, power):
    share, kappa = np.array(pieces).T
    widths, kappa = 2 * np.pi * share / share.sum(), 10.0**kappa
    plain = exponents(widths, kappa, closed=True)
    rolled = exponents(np.roll(widths, shift), 10.0**power * np.roll(kappa, shift), closed=True)
    mirrored = exponents(widths[::-1], kappa[::-1], closed=True)
    cut = exponents([0.4 * widths[0], *widths[1:], 0.6 * widths[0]], [*kappa, kappa[0]], closed=True)
    for other in (rolled, mirrored, cut):
        assert other == pytest.approx(plain, abs=1e-6)


def test_many_vertices_at_once_give_what_each_gives_alone():
    generator = np.random.default_rng(4)
    widths, kappa = generator.uniform(0.1, 1, (30, 4)), 10 ** generator.uniform(-3, 3, (30, 4))
    closed, held = generator.random(30) < 0.5, generator.random((30, 2)) < 0.5
    widths[::3, 2:] = 0.0
    kappa[::3, 2:] = kappa[::3, 1:2]
    widths[closed] *= 2 * np.pi / widths[closed].sum(axis=1, keepdims=True)
    together = transmission_exponents(widths, kappa, closed, held)
    for row, width, k, ring, ends in zip(together, widths, kappa, closed, held, strict=True):
        used = width > 0
        alone = exponents(width[used], k[used], closed=ring, held=tuple(ends))
        assert row[row < 2] == pytest.approx(alone, rel=1e-12)


def test_no_vertices_and_no_exponents():
    none = transmission_exponents(np.empty((0, 3)), np.empty((0, 3)), np.empty(0, dtype=bool), np.empty((0, 2), bool))
    assert none.shape[0] == 0
    assert len(exponents([0.1, 0.2], [1, 2])) == 0
