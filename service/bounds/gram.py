"""Matrices of inner products together with what rounding may have done to them."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.bounds.rounding import exact_sum

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Gram:
    """A symmetric matrix of inner products of m functions as computed.

    matrix : (m, m).
    error : (m, m) bounds of the errors of its entries.
    """

    matrix: Array
    error: Array

    def __add__(self, other: "Gram") -> "Gram":
        return Gram(self.matrix + other.matrix, 1.0001 * (self.error + other.error))

    def scaled(self, factor: float) -> "Gram":
        """Every inner product times ``factor`` >= 0."""
        return Gram(factor * self.matrix, 1.0001 * factor * self.error)

    @property
    def slack(self) -> Array:
        """A diagonal matrix that is at least the error, as a form: row sums (Gershgorin)."""
        rounding = 1e-15 * np.abs(self.matrix)
        return np.diag(np.sum(self.error + rounding, axis=1) * 1.0001)


def gram(functions: Array, local: Array, bounds: Array, relative: float) -> Gram:
    """Inner products of functions given cell by cell.

    Parameters
    ----------
    functions : (nc, n, m) coefficients.
    local : (nc, n, n) local matrices.
    bounds : (nc, n, n) with |error of an entry of local| <= relative times this, and >= |local|.
    relative : covers the local matrices and the products formed here.
    """
    matrix = exact_sum(functions.swapaxes(1, 2) @ (local @ functions))
    size = np.abs(functions)
    error = exact_sum(size.swapaxes(1, 2) @ (bounds @ size))
    return Gram((matrix + matrix.T) / 2, 1.01 * relative * (error + error.T) / 2)
