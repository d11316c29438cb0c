"""Smallest eigenpairs by a block Krylov space of the inverse: finds multiple eigenvalues as well as simple ones.

Nothing proved rests on convergence here: bounds are computed afterwards from whatever vectors come out.
"""

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Operator = Callable[[Array], Array]


def orthonormalise(block: Array, heavy: Array) -> tuple[Array, Array]:
    """A basis of the span of ``block`` (n, b), orthonormal in the mass inner product, and the mass times it.

    ``heavy`` is the mass times the block. Drops dependent columns.
    """
    norms = sizes(block, heavy)
    block, heavy = block[:, norms > 0] / norms[norms > 0], heavy[:, norms > 0] / norms[norms > 0]
    values, vectors = np.linalg.eigh(block.T @ heavy)
    keep = values > 1e-13 * values[-1]
    turn = vectors[:, keep] / np.sqrt(values[keep])
    return np.asarray(block @ turn), np.asarray(heavy @ turn)


def sizes(block: Array, heavy: Array) -> Array:
    """Norms of the columns, given the mass times them."""
    return np.asarray(np.sqrt(np.maximum(np.einsum("ij,ij->j", block, heavy), 0.0)))


def smallest_pairs(
    inverse: Operator,
    mass: Operator,
    start: Array,
    wanted: int,
    tolerance: float,
    rounds: int = 12,
    depth: int = 4,
) -> tuple[Array, Array]:
    """The smallest eigenvalues of A x = t M x and mass-orthonormal vectors.

    Parameters
    ----------
    inverse : applies A^-1 (A symmetric positive definite) to columns (n, b).
    mass : applies M (symmetric positive definite).
    start : (n, b) starting block, b >= wanted.
    wanted : number of pairs that must have converged.
    tolerance : relative change of the wanted eigenvalues at which iteration ends.
    rounds : most restarts; a dense cluster is left unresolved then.
    depth : block steps between restarts.

    Returns
    -------
    (b,) ascending eigenvalue approximations (of A against M) and (n, b) vectors.
    """
    size = start.shape[1]
    # One application of the inverse first: it removes what the mass matrix does not see.
    block = inverse(mass(start))
    before = np.full(wanted, np.inf)
    values, vectors = np.zeros(0), block
    for _ in range(rounds):
        basis, heavy = orthonormalise(block, mass(block))
        image = inverse(heavy)
        images = [image]
        for _ in range(depth - 1):
            inside = heavy.T @ image
            fresh = image - basis @ inside
            fresh = fresh - basis @ (heavy.T @ fresh)
            weighed = mass(fresh)
            length = sizes(fresh, weighed)
            # What is left of a direction that is in the space already is rounding.
            left = length > 1e-9 * np.sqrt(length**2 + np.sum(inside**2, axis=0))
            if not np.any(left):
                break
            fresh, weighed = orthonormalise(fresh[:, left], weighed[:, left])
            again = heavy.T @ fresh
            fresh, weighed = fresh - basis @ again, weighed - heavy @ again
            basis, heavy = np.hstack([basis, fresh]), np.hstack([heavy, weighed])
            image = inverse(weighed)
            images.append(image)
        applied = np.hstack(images)
        projected = heavy.T @ applied
        inverted, coefficients = np.linalg.eigh((projected + projected.T) / 2)
        order = np.argsort(-inverted)[:size]
        values = 1.0 / inverted[order]
        vectors = basis @ coefficients[:, order]
        # The mass may see fewer directions than are wanted.
        found = values[:wanted]
        if len(found) == len(before) and np.all(np.abs(found - before) <= tolerance * np.abs(found)):
            break
        before = found
        # One more application of the inverse smooths the restart for free.
        block = applied @ coefficients[:, order]
    return values, vectors
