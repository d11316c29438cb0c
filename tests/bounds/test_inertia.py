"""Inertia counts: the residual is a bound in multiple precision, and counts are those of dense eigenvalues."""

from fractions import Fraction
from types import SimpleNamespace

import numpy as np
import pytest
import qdldl
from numpy.typing import NDArray
from scipy.sparse import csc_matrix, diags_array, random_array

from service.bounds import inertia
from service.bounds.inertia import SingularPivotError, factorise, smallest_eigenvalue_bound

Array = NDArray[np.float64]


def indefinite(size: int, seed: int, spread: float = 0.0) -> csc_matrix:
    """A random sparse symmetric matrix, rows scaled over ``spread`` powers of ten."""
    random = np.random.default_rng(seed)
    upper = random_array((size, size), density=min(1.0, 4 / size), rng=random, data_sampler=random.standard_normal)
    scale = diags_array(10.0 ** random.uniform(-spread / 2, spread / 2, size))
    matrix = upper + upper.T + diags_array(random.standard_normal(size))
    return csc_matrix(scale @ matrix @ scale)


def exact_residual(matrix: csc_matrix) -> Array:
    """P N P^T - L D L^T in rational arithmetic, rounded at the end."""
    found = factorise(matrix)
    lower, pivots, order = found.solver.factors()
    size = matrix.shape[0]
    triangular = np.array([[Fraction(float(x)) for x in row] for row in csc_matrix(lower).toarray()])
    triangular = triangular + np.array([[Fraction(int(i == j)) for j in range(size)] for i in range(size)])
    diagonal = np.array([Fraction(float(x)) for x in pivots])
    permuted = matrix.toarray()[np.ix_(order, order)]
    given = np.array([[Fraction(float(x)) for x in row] for row in permuted])
    return np.array((given - (triangular * diagonal) @ triangular.T).astype(float))


@pytest.mark.parametrize("spread", [0.0, 8.0])
@pytest.mark.parametrize("seed", range(4))
def test_residual_bounds_the_error_of_the_factors(seed: int, spread: float) -> None:
    matrix = indefinite(30, seed, spread)
    found = factorise(matrix)
    error = float(np.linalg.norm(exact_residual(matrix), 2))
    assert 0 < error <= found.residual
    # A bound by row sums and a-priori roundings, not a wild guess: within a few thousand times the truth.
    assert found.residual <= 1e4 * error


class Careless:
    """A solver whose pivots are off by a millionth."""

    def __init__(self, matrix: csc_matrix, upper: bool) -> None:
        self.honest = qdldl.Solver(matrix, upper=upper)

    def factors(self) -> tuple[csc_matrix, Array, NDArray[np.int64]]:
        lower, pivots, order = self.honest.factors()
        return lower, pivots * (1 + 1e-6), order


def test_a_careless_factorisation_is_found_out(monkeypatch: pytest.MonkeyPatch) -> None:
    """The residual is formed from the factors, not believed."""
    matrix = indefinite(30, 3)
    honest = factorise(matrix).residual
    monkeypatch.setattr(inertia, "qdldl", SimpleNamespace(Solver=Careless))
    error = float(np.linalg.norm(exact_residual(matrix), 2))
    assert error > 1e-7 > honest
    assert error <= factorise(matrix).residual


@pytest.mark.parametrize("size", [1, 2, 40, 300])
@pytest.mark.parametrize("seed", range(5))
def test_counts_are_those_of_dense_eigenvalues(size: int, seed: int) -> None:
    matrix = indefinite(size, 100 + seed)
    values = np.linalg.eigvalsh(matrix.toarray())
    found = factorise(matrix)
    doubt = found.residual + 1e-13 * np.abs(values).max()
    assert np.sum(values < -doubt) <= found.negative <= np.sum(values < doubt)


@pytest.mark.parametrize("seed", range(5))
def test_a_shift_just_below_and_above_an_eigenvalue_changes_the_count_by_one(seed: int) -> None:
    matrix = indefinite(60, 200 + seed)
    values = np.linalg.eigvalsh(matrix.toarray())
    number = int(np.argmax(np.diff(values)))
    identity = diags_array(np.ones(60))
    for side, count in ((-1e-9, number), (1e-9, number + 1)):
        shifted = csc_matrix(matrix - (values[number] + side) * identity)
        found = factorise(shifted)
        assert found.negative == count
        assert found.residual < 1e-9


def test_a_zero_pivot_is_an_error_not_a_count() -> None:
    with pytest.raises(SingularPivotError):
        factorise(csc_matrix(np.array([[0.0, 1.0], [1.0, 0.0]])))


@pytest.mark.parametrize("least", [1.0, 1e-3, 1e-8])
@pytest.mark.parametrize("seed", range(5))
def test_smallest_eigenvalue_is_bounded_from_below_and_sharply(seed: int, least: float) -> None:
    random = np.random.default_rng(seed)
    rotation = np.linalg.qr(random.standard_normal((25, 25)))[0]
    values = np.concatenate([[least], least + random.uniform(0.1, 1, 24)])
    matrix = rotation * values @ rotation.T
    bound = smallest_eigenvalue_bound(csc_matrix((matrix + matrix.T) / 2))
    assert 0.4 * least <= bound <= least * (1 + 1e-6)


def test_an_indefinite_matrix_has_no_positive_bound() -> None:
    for seed in range(5):
        assert smallest_eigenvalue_bound(indefinite(40, 300 + seed)) == 0.0
