"""The block Krylov solver finds multiple eigenvalues as well as simple ones."""

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.linalg import eigh

from service.bounds.krylov import orthonormalise, smallest_pairs

Array = NDArray[np.float64]


def grid(count: int) -> tuple[Array, Array]:
    """Stiffness and mass of a square grid with a weight in the mass: eigenvalues of the first kind come in pairs."""
    second = 2 * np.eye(count) - np.eye(count, k=1) - np.eye(count, k=-1)
    one = np.eye(count) * 6 - second
    return np.kron(second, one) + np.kron(one, second), np.kron(one, one) / 6


def solve(stiffness: Array, mass: Array, block: int, wanted: int, tolerance: float) -> tuple[Array, Array]:
    inverse = np.linalg.inv(stiffness)
    start = np.random.default_rng(3).standard_normal((len(mass), block))
    return smallest_pairs(lambda v: inverse @ v, lambda v: mass @ v, start, wanted, tolerance, rounds=40)


@pytest.mark.parametrize("wanted", [1, 3, 6])
def test_double_eigenvalues_are_found_twice(wanted: int) -> None:
    stiffness, mass = grid(12)
    exact = eigh(stiffness, mass, eigvals_only=True)
    assert abs(exact[1] - exact[2]) < 1e-12
    values, vectors = solve(stiffness, mass, wanted + 2, wanted, 1e-11)
    np.testing.assert_allclose(values[:wanted], exact[:wanted], rtol=1e-9)
    np.testing.assert_allclose(vectors.T @ mass @ vectors, np.eye(wanted + 2), atol=1e-10)
    residual = stiffness @ vectors[:, :wanted] - mass @ vectors[:, :wanted] * values[:wanted]
    assert np.abs(residual).max() < 1e-4 * exact[wanted - 1]


def test_a_triple_eigenvalue_at_the_bottom_is_found_three_times() -> None:
    random = np.random.default_rng(5)
    rotation = np.linalg.qr(random.standard_normal((50, 50)))[0]
    exact = np.concatenate([[2.0, 2.0, 2.0], np.linspace(3, 100, 47)])
    values, _ = solve(rotation * exact @ rotation.T, np.eye(50), 5, 4, 1e-12)
    np.testing.assert_allclose(values[:4], exact[:4], rtol=1e-9)


def test_ritz_values_are_upper_bounds() -> None:
    stiffness, mass = grid(10)
    exact = eigh(stiffness, mass, eigvals_only=True)
    inverse = np.linalg.inv(stiffness)
    start = np.random.default_rng(7).standard_normal((100, 4))
    values, _ = smallest_pairs(lambda v: inverse @ v, lambda v: mass @ v, start, 4, 1e-1, rounds=1, depth=2)
    assert np.all(values >= exact[:4] * (1 - 1e-12))


def test_dependent_columns_are_dropped() -> None:
    random = np.random.default_rng(1)
    block = random.standard_normal((20, 3))
    block = np.hstack([block, block @ random.standard_normal((3, 2))])
    basis, heavy = orthonormalise(block, 4 * block)
    assert basis.shape == (20, 3)
    np.testing.assert_allclose(heavy, 4 * basis, atol=1e-12)
    np.testing.assert_allclose(4 * basis.T @ basis, np.eye(3), atol=1e-12)
