"""How many negative eigenvalues a sparse symmetric matrix has, proved in floating-point arithmetic."""

from dataclasses import dataclass

import numpy as np
import qdldl
from numpy.typing import NDArray
from scipy.sparse import csc_matrix, diags_array, identity, triu

from service.bounds.rounding import gamma

Array = NDArray[np.float64]


class SingularPivotError(ArithmeticError):
    """The factorisation met a zero pivot: the matrix must be shifted a little."""


@dataclass(frozen=True)
class Factorisation:
    """P N P^T = L D L^T + E with ||E||_2 <= residual.

    negative : number of negative entries of D. By Sylvester and Weyl, N + residual I has at most so many negative
        eigenvalues, and N - residual I at least.
    """

    negative: int
    residual: float
    solver: "qdldl.Solver"


def eliminate(matrix: csc_matrix) -> "qdldl.Solver":
    """Sparse elimination of a symmetric matrix without pivoting.

    Raises
    ------
    SingularPivotError
        If a pivot vanishes.
    """
    try:
        return qdldl.Solver(csc_matrix(triu(matrix)), upper=True)
    except RuntimeError as error:
        raise SingularPivotError(str(error)) from error


def negatives(matrix: csc_matrix) -> int:
    """Negative pivots, as computed and unproved."""
    return int(np.sum(eliminate(matrix).factors()[1] < 0))


def factorise(matrix: csc_matrix) -> Factorisation:
    """Factorises a symmetric matrix and bounds the residual a posteriori.

    The residual is formed explicitly; the rounding of that product is bounded a priori by
    gamma_(n_i) (|L| |D| |L^T|), n_i the longest row of L. The largest absolute row sum bounds the 2-norm.

    Raises
    ------
    SingularPivotError
        If a pivot vanishes or overflows.
    """
    size = matrix.shape[0]
    solver = eliminate(matrix)
    lower, pivots, order = solver.factors()
    lower = csc_matrix(lower) + identity(size, format="csc")
    if not np.all(np.isfinite(pivots)) or np.any(pivots == 0):
        raise SingularPivotError("zero pivot")
    permuted = matrix[order][:, order]
    residual = abs(permuted - lower @ (diags_array(pivots) @ lower.T))
    magnitude = abs(lower) @ (abs(pivots) * (abs(lower).T @ np.ones(size)))
    longest = int(np.max(np.diff(lower.tocsr().indptr))) + 3
    ones = np.ones(size)
    rows = residual @ ones * (1 + gamma(size)) + gamma(longest) * magnitude * (1 + gamma(2 * size))
    # The difference itself rounds once per entry.
    rows = rows + gamma(2) * (abs(permuted) @ ones)
    return Factorisation(int(np.sum(pivots < 0)), float(np.max(rows)) * (1 + gamma(size)), solver)


def smallest_eigenvalue_bound(matrix: csc_matrix) -> float:
    """A proved positive lower bound of the smallest eigenvalue of a positive definite matrix, or 0.

    Inverse iteration gives a guess, a factorisation of the matrix shifted by it the proof.
    """
    first = eliminate(matrix)
    vector = np.ones(matrix.shape[0])
    norm = 1.0
    for _ in range(6):
        vector = first.solve(vector / np.linalg.norm(vector))
        norm = float(np.linalg.norm(vector))
    # Where eigenvalues crowd the iteration has not found the smallest one.
    for guess in (0.5 / norm, 0.1 / norm, 0.01 / norm):
        second = factorise(csc_matrix(matrix - guess * identity(matrix.shape[0], format="csc")))
        if second.negative == 0:
            return max(0.0, guess - second.residual)
    return 0.0
