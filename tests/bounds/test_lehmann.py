"""Bounds from small dense pencils whose eigenvalues are known, with and without errors in the matrices."""

from dataclasses import dataclass

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from service.bounds.gram import Gram
from service.bounds.lehmann import definite_pencil, lower_bounds, upper_bounds

Array = NDArray[np.float64]

SIZE = 12


@dataclass(frozen=True)
class Known:
    """A pencil A x = tau B x of known eigenvalues, and inner products of m trial vectors u_i near the first ones.

    dual : of w_i with A(w_i, v) = B(u_i, v), i.e. A^-1 B u_i, in the energy; plus something orthogonal if inexact.
    """

    values: Array
    energy: Array
    mass: Array
    dual: Array


def known(values: Array, count: int, noise: float, inexact: float, seed: int) -> Known:
    random = np.random.default_rng(seed)
    transform = random.standard_normal((len(values), len(values))) + 3 * np.eye(len(values))
    inverse = np.linalg.inv(transform)
    energy, mass = inverse.T * values @ inverse, inverse.T @ inverse
    vectors = transform[:, :count] + noise * transform @ random.standard_normal((len(values), count))
    images = np.linalg.solve(energy, mass @ vectors)
    extra = inexact * random.standard_normal((3, count))
    return Known(
        values,
        vectors.T @ energy @ vectors,
        vectors.T @ mass @ vectors,
        images.T @ energy @ images + extra.T @ extra,
    )


def exactly(matrix: Array) -> Gram:
    """With room for the rounding of this file's own arithmetic."""
    size = np.sqrt(np.abs(np.diag(matrix)))
    return Gram((matrix + matrix.T) / 2, 1e-10 * np.outer(size, size))


def wrong(matrix: Array, by: float, seed: int) -> Gram:
    """The matrix off by up to ``by`` of its size in every entry, and bounds that say so."""
    random = np.random.default_rng(seed)
    size = np.sqrt(np.abs(np.diag(matrix)))
    bound = by * np.outer(size, size)
    error = bound * random.choice([-1.0, 1.0], bound.shape)
    error = np.triu(error) + np.triu(error, 1).T
    return Gram((matrix + matrix.T) / 2 + error, bound + 1e-10 * np.outer(size, size))


VALUES = np.array([1.0, 2.0, 2.0, 3.5, 5.0, 7.0, 7.0, 11.0, 20.0, 50.0, 100.0, 1000.0])

spectra = st.lists(st.floats(0.1, 10.0), min_size=SIZE, max_size=SIZE).map(lambda steps: np.cumsum(np.array(steps)))


@pytest.mark.parametrize("count", [1, 3, 4, 5])
def test_bounds_are_sharp_for_eigenvectors(count: int) -> None:
    pencil = known(VALUES, count, 0.0, 0.0, count)
    rho = 0.5 * (VALUES[count - 1] + VALUES[count])
    lower = lower_bounds(exactly(pencil.energy), exactly(pencil.mass), exactly(pencil.dual), rho)
    upper = upper_bounds(exactly(pencil.energy), exactly(pencil.mass))
    assert np.all(lower <= VALUES[:count])
    assert np.all(VALUES[:count] <= upper)
    np.testing.assert_allclose(lower, VALUES[:count], rtol=1e-7)
    np.testing.assert_allclose(upper, VALUES[:count], rtol=1e-7)


@settings(max_examples=100)
@given(spectra, st.integers(1, 6), st.floats(1e-6, 0.1), st.floats(0, 0.1), st.floats(0, 1), st.integers(0, 999))
def test_bounds_enclose(values: Array, count: int, noise: float, inexact: float, where: float, seed: int) -> None:
    pencil = known(values, count, noise, inexact, seed)
    rho = values[count - 1] + where * (values[count] - values[count - 1])
    lower = lower_bounds(exactly(pencil.energy), exactly(pencil.mass), exactly(pencil.dual), rho)
    upper = upper_bounds(exactly(pencil.energy), exactly(pencil.mass))
    assert np.all(lower <= values[:count] * (1 + 1e-12))
    assert np.all(values[:count] <= upper * (1 + 1e-12))


@settings(max_examples=100)
@given(spectra, st.integers(1, 6), st.floats(0, 0.05), st.sampled_from([1e-8, 1e-5, 1e-3]), st.integers(0, 999))
def test_bounds_enclose_though_the_matrices_are_wrong(
    values: Array, count: int, noise: float, by: float, seed: int
) -> None:
    pencil = known(values, count, noise, 0.0, seed)
    rho = 0.5 * (values[count - 1] + values[count])
    energy, mass, dual = (
        wrong(matrix, by, seed + number) for number, matrix in enumerate((pencil.energy, pencil.mass, pencil.dual))
    )
    lower = lower_bounds(energy, mass, dual, rho)
    upper = upper_bounds(energy, mass)
    assert np.all(lower <= values[:count])
    assert np.all(values[:count] <= upper)


@pytest.mark.parametrize("which", ["energy", "mass", "dual"])
@pytest.mark.parametrize("by", [1e-8, 1e-4, 1e-2])
def test_each_matrix_may_be_wrong_in_the_worst_direction(by: float, which: str) -> None:
    """Exact eigenvectors leave no room: what a smaller dual, or energy, or a larger mass, would gain is taken back."""
    pencil = known(VALUES, 1, 0.0, 0.0, 8)
    matrices = {"energy": pencil.energy, "mass": pencil.mass, "dual": pencil.dual}
    for sign in (-1.0, 1.0):
        grams = {name: exactly(matrix) for name, matrix in matrices.items()}
        bound = by * matrices[which]
        grams[which] = Gram(matrices[which] + sign * bound, 1.000001 * bound + 1e-10 * matrices[which])
        lower = lower_bounds(grams["energy"], grams["mass"], grams["dual"], 1.5)
        upper = upper_bounds(grams["energy"], grams["mass"])
        assert lower[0] <= VALUES[0] <= upper[0]


def test_small_errors_cost_little() -> None:
    """Eigenvectors, matrices off by 1e-9: the bounds are off by not much more."""
    pencil = known(VALUES, 3, 0.0, 0.0, 2)
    energy, mass, dual = (wrong(m, 1e-9, n) for n, m in enumerate((pencil.energy, pencil.mass, pencil.dual)))
    np.testing.assert_allclose(lower_bounds(energy, mass, dual, 3.0), VALUES[:3], rtol=1e-5)
    np.testing.assert_allclose(upper_bounds(energy, mass), VALUES[:3], rtol=1e-5)


def test_a_bound_below_the_trial_functions_proves_nothing() -> None:
    """rho must lie above the Ritz values: else there are no m negative directions."""
    pencil = known(VALUES, 3, 0.0, 0.0, 4)
    rho = 1.5
    lower = lower_bounds(exactly(pencil.energy), exactly(pencil.mass), exactly(pencil.dual), rho)
    assert np.all(lower == -np.inf)


def in_long_double(matrix: Array) -> NDArray[np.longdouble]:
    return matrix.astype(np.longdouble)


@pytest.mark.parametrize("condition", [1.0, 1e4, 1e8])
@pytest.mark.parametrize("seed", range(10))
def test_residuals_of_a_small_pencil_are_bounds(seed: int, condition: float) -> None:
    random = np.random.default_rng(seed)
    rotation = np.linalg.qr(random.standard_normal((6, 6)))[0]
    second = rotation * np.geomspace(1 / condition, 1, 6) @ rotation.T
    first = random.standard_normal((6, 6))
    first, second = first + first.T, (second + second.T) / 2
    solved = definite_pencil(first, second)
    assert solved is not None
    values, vectors, e, f = solved
    wide = in_long_double(vectors)
    defects = (
        wide.T @ in_long_double(first) @ wide - np.diag(in_long_double(values)),
        wide.T @ in_long_double(second) @ wide - np.eye(6),
    )
    for defect, bound in zip(defects, (e, f), strict=True):
        assert np.linalg.norm(defect.astype(float), 2) <= bound
    assert f <= 1e-10 * condition


@pytest.mark.parametrize("least", [0.0, -1e-3])
def test_an_indefinite_second_matrix_is_refused(least: float) -> None:
    rotation = np.linalg.qr(np.random.default_rng(0).standard_normal((4, 4)))[0]
    second = rotation * np.array([least, 1, 1, 1]) @ rotation.T
    assert definite_pencil(np.eye(4), (second + second.T) / 2) is None
