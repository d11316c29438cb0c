"""Smallest eigenpairs by a block Krylov space of the inverse: finds multiple eigenvalues as well as simple ones.

Nothing proved rests on convergence here: bounds are computed afterwards from whatever vectors come out.
"""

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Operator = Callable[[Array], Array]


def orthonormalise(block: Array, mass: Operator) -> Array:
    """A basis of the span of ``block`` (n, b), orthonormal in the mass inner product; drops dependent columns."""
    norms = sizes(block, mass)
    block = block[:, norms > 0] / norms[norms > 0]
    values, vectors = np.linalg.eigh(block.T @ mass(block))
    keep = values > 1e-13 * values[-1]
    return np.asarray(block @ (vectors[:, keep] / np.sqrt(values[keep])))


def sizes(block: Array, mass: Operator) -> Array:
    """Norms of the columns."""
    return np.asarray(np.sqrt(np.maximum(np.einsum("ij,ij->j", block, mass(block)), 0.0)))


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
    block = orthonormalise(inverse(mass(start)), mass)
    before = np.full(wanted, np.inf)
    values, vectors = np.zeros(0), block
    for _ in range(rounds):
        basis = block
        image = inverse(mass(block))
        images = [image]
        for _ in range(depth - 1):
            fresh, length = image, sizes(image, mass)
            for _ in range(2):
                fresh = fresh - basis @ (basis.T @ mass(fresh))
            # What is left of a direction that is in the space already is rounding.
            left = sizes(fresh, mass) > 1e-9 * length
            if not np.any(left):
                break
            fresh = orthonormalise(fresh[:, left], mass)
            fresh = fresh - basis @ (basis.T @ mass(fresh))
            basis = np.hstack([basis, fresh])
            image = inverse(mass(fresh))
            images.append(image)
        applied = np.hstack(images)
        projected = basis.T @ mass(applied)
        inverted, coefficients = np.linalg.eigh((projected + projected.T) / 2)
        order = np.argsort(-inverted)[:size]
        values = 1.0 / inverted[order]
        vectors = basis @ coefficients[:, order]
        if np.all(np.abs(values[:wanted] - before) <= tolerance * np.abs(values[:wanted])):
            break
        before = values[:wanted]
        # One more application of the inverse smooths the restart for free.
        block = orthonormalise(applied @ coefficients[:, order], mass)
    return values, vectors
