"""Sparse linear systems with the unknowns inside each cell eliminated first, all cells at once."""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_matrix, csc_matrix, csr_matrix
from scipy.sparse.linalg import SuperLU, splu

Array = NDArray[np.float64]


def assemble(local: Array, numbers: NDArray[np.int64], size: int) -> csc_matrix:
    """Sum of local matrices (nc, n, n) with unknown ``numbers`` (nc, n); negative numbers are left out."""
    rows = np.broadcast_to(numbers[:, :, None], local.shape)
    columns = np.broadcast_to(numbers[:, None, :], local.shape)
    keep = (rows >= 0) & (columns >= 0)
    return csc_matrix(coo_matrix((local[keep], (rows[keep], columns[keep])), shape=(size, size)))


class NotPositiveError(ArithmeticError):
    """A matrix that should be positive definite is not."""


def positive_solver(matrix: csc_matrix) -> SuperLU:
    """Factorisation of a symmetric positive definite matrix.

    Raises
    ------
    NotPositiveError
        If a pivot is not positive.
    """
    try:
        factor = splu(matrix, permc_spec="MMD_AT_PLUS_A", diag_pivot_thresh=0.0, options={"SymmetricMode": True})
    except RuntimeError as error:
        raise NotPositiveError(str(error)) from error
    if not np.all(factor.U.diagonal() > 0):
        raise NotPositiveError("negative pivot")
    return factor


@dataclass(frozen=True)
class Numbering:
    """Which global unknown each local coefficient is.

    skeleton : (nc, ns) numbers of the coefficients shared between cells, -1 where held at zero.
    bubbles : coefficients of each cell's own, numbered behind all shared ones.
    """

    skeleton: NDArray[np.int64]
    bubbles: int

    @cached_property
    def shared(self) -> int:
        """Number of shared unknowns."""
        return int(np.max(self.skeleton, initial=-1)) + 1

    @property
    def size(self) -> int:
        """Number of unknowns."""
        return self.shared + self.bubbles * len(self.skeleton)

    @cached_property
    def every(self) -> NDArray[np.int64]:
        """(nc, ns + bubbles) numbers of all local coefficients."""
        cells = len(self.skeleton)
        own = self.shared + np.arange(cells * self.bubbles).reshape(cells, self.bubbles)
        return np.concatenate([self.skeleton, own], axis=1)

    @cached_property
    def gather(self) -> csr_matrix:
        """(nc ns, shared) matrix that copies shared unknowns into cells; its transpose adds cell loads up."""
        flat = self.skeleton.ravel()
        keep = np.flatnonzero(flat >= 0)
        return csr_matrix((np.ones(len(keep)), (keep, flat[keep])), shape=(len(flat), self.shared))

    def spread(self, vector: Array) -> Array:
        """Local coefficients (nc, n, b) of global vectors (size, b)."""
        cells, columns = len(self.skeleton), vector.shape[1]
        outside = (self.gather @ vector[: self.shared]).reshape(cells, -1, columns)
        return np.concatenate([outside, vector[self.shared :].reshape(cells, -1, columns)], axis=1)

    def collect(self, loads: Array) -> Array:
        """Transpose of ``spread``: adds cell loads (nc, n, b) up."""
        columns, width = loads.shape[2], self.skeleton.shape[1]
        outside = self.gather.T @ loads[:, :width].reshape(-1, columns)
        return np.vstack([outside, loads[:, width:].reshape(-1, columns)])

    def restrict(self, functions: Array) -> Array:
        """Global vector of a function whose shared coefficients agree."""
        columns, width = functions.shape[2], self.skeleton.shape[1]
        vector = np.zeros((self.size, columns))
        flat = self.skeleton.ravel()
        keep = flat >= 0
        vector[flat[keep]] = functions[:, :width].reshape(-1, columns)[keep]
        vector[self.shared :] = functions[:, width:].reshape(-1, columns)
        return vector


@dataclass(frozen=True)
class Condensed:
    """A factorised symmetric positive definite system."""

    numbering: Numbering
    factor: SuperLU
    inner: Array
    coupling: Array

    @staticmethod
    def build(local: Array, numbering: Numbering) -> "Condensed":
        """Eliminates the bubbles of each local matrix (nc, n, n) and factorises what remains."""
        width = numbering.skeleton.shape[1]
        inner = np.asarray(np.linalg.inv(local[:, width:, width:]), dtype=float)
        coupling: Array = inner @ local[:, width:, :width]
        schur: Array = local[:, :width, :width] - local[:, :width, width:] @ coupling
        factor = positive_solver(assemble(schur, numbering.skeleton, numbering.shared))
        return Condensed(numbering, factor, inner, coupling)

    def solve(self, load: Array) -> Array:
        """Solutions (size, b) for global loads (size, b)."""
        numbering = self.numbering
        columns, cells = load.shape[1], len(numbering.skeleton)
        inside = load[numbering.shared :].reshape(cells, -1, columns)
        eliminated = (self.coupling.transpose(0, 2, 1) @ inside).reshape(-1, columns)
        shared = self.factor.solve(load[: numbering.shared] - numbering.gather.T @ eliminated)
        outside = (numbering.gather @ shared).reshape(cells, -1, columns)
        bubbles = self.inner @ inside - self.coupling @ outside
        return np.vstack([shared, bubbles.reshape(-1, columns)])
