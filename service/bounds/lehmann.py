"""Lower bounds of many eigenvalues at once from trial functions, fluxes, and one rough bound of the next eigenvalue.

Lehmann (Math. Z. 1949/50), Goerisch (1980s); H. Behnke and F. Goerisch in Topics in Validated Computations (1994).
"""

import numpy as np
from numpy.typing import NDArray

from service.bounds.flux import FluxSpace
from service.bounds.ritz import Gram, TrialSpace, gram
from service.bounds.rounding import UNIT, down, gamma, up

Array = NDArray[np.float64]


def definite_pencil(first: Array, second: Array) -> tuple[Array, Array, float, float] | None:
    """Eigenvalues of a small symmetric pencil with proved residuals.

    Returns (values, vectors, e, f) with X^T F X = diag(values) + E, X^T S X = I + H, ||E|| <= e, ||H|| <= f < 1/2;
    None if the second matrix is not safely positive definite.
    """
    scale = np.diag(second)
    if not np.all(scale > 0):
        return None
    root = 1 / np.sqrt(scale)
    try:
        factor = np.linalg.cholesky(second * root[:, None] * root)
    except np.linalg.LinAlgError:
        return None
    half = np.linalg.inv(factor) * root
    values, rotation = np.linalg.eigh(half @ first @ half.T)
    vectors = half.T @ rotation
    size = len(values)
    rounding = gamma(2 * size + 4)
    reach = np.abs(vectors)

    def defect(matrix: Array, target: Array) -> float:
        computed = vectors.T @ matrix @ vectors - target
        allowance = rounding * (reach.T @ np.abs(matrix) @ reach) + 2 * UNIT * np.abs(target)
        return float(np.max(np.sum(np.abs(computed) + allowance, axis=1))) * (1 + 4 * size * UNIT)

    e = defect(first, np.diag(values))
    f = defect(second, np.eye(size))
    return (values, vectors, e, f) if f < 0.5 else None


def upper_bounds(energy: Gram, mass: Gram) -> Array:
    """Proved upper bounds of tau_1..tau_m: the Ritz values of m trial functions, errors of both matrices included."""
    count = len(energy.matrix)
    above = energy.matrix + np.diag(count * energy.size)
    below = mass.matrix - np.diag(count * mass.size)
    solved = definite_pencil(above, below)
    if solved is None:
        return np.full(count, np.inf)
    values, _, e, f = solved
    return np.array([up((v + e) / (1 - f if v + e > 0 else 1 + f), 8) for v in values])


def lower_bounds(energy: Gram, mass: Gram, dual: Gram, rho: float) -> Array:
    """Proved lower bounds of tau_1..tau_m, given 0 < rho <= tau_(m+1).

    energy, mass, dual : A0 = A(u_i, u_j), A1 = B(u_i, u_j), A2 = <w_i, w_j> of m trial functions.

    Returns
    -------
    (m,) bounds; -inf where the trial functions do not prove anything.
    """
    count = len(energy.matrix)
    nothing = np.full(count, -np.inf)
    left = energy.matrix - rho * mass.matrix
    right = energy.matrix - 2 * rho * mass.matrix + rho**2 * dual.matrix
    magnitude = np.abs(np.diag(energy.matrix)) + 2 * rho * np.diag(mass.matrix) + rho**2 * np.diag(dual.matrix)
    formed = 8 * UNIT * count * magnitude
    sizes = count * (energy.size + 2 * rho * mass.size + rho**2 * dual.size)
    # Larger forms move every negative eigenvalue toward zero, hence the bounds down.
    solved = definite_pencil(left + np.diag(sizes + formed), right + np.diag(sizes + formed))
    if solved is None:
        return nothing
    values, _, e, f = solved
    if values[-1] + e >= 0:
        return nothing
    shares = [(v + e) / (1 + f) for v in values]
    ascending = [down(rho - up(rho / (1 - mu), 8), 8) for mu in shares]
    return np.array(ascending[::-1])


def goerisch_gram(trial: TrialSpace, flux: FluxSpace, functions: Array, ratios: Array) -> Gram:
    """Inner products of w_i = (G^-1 s_i, (b u_i + div s_i) / p) for trial functions with approximate ratios A/B.

    s_i has the divergence (p - t_i b) / t_i u_i that makes w_i = (grad u_i, u_i) / t_i for an eigenfunction, and
    least energy. <w_i, (grad v, v)> = B(u_i, v) holds for every such field.
    """
    pencil = trial.pencil
    moments = trial.reference.moments @ functions
    jacobian = pencil.jacobian[:, None, None]
    factor = pencil.potential[:, None, None] / ratios - pencil.weight[:, None, None]
    fields = flux.equilibrate(jacobian * factor * moments)
    spread, rounding = flux.divergence_moments(fields)
    weight = pencil.weight[:, None, None] * jacobian
    sizes = np.sqrt(np.diag(trial.reference.mass))
    relative = 2.0**-42 + gamma(2 * len(sizes) + 8)
    own = relative * weight[:, 0] * np.einsum("n,cnm->cm", sizes, np.abs(functions))
    residual = weight * moments + spread
    error = own + rounding + 4 * UNIT * np.max(np.abs(residual), axis=1)
    scale = 1 / (pencil.potential * pencil.jacobian)
    # Moments against orthonormal polynomials: the squared norm is their sum of squares over p |det J|.
    count = residual.shape[1]
    weights = np.broadcast_to(1.01 * scale[:, None], (len(scale), count))
    second = gram(residual, scale[:, None, None] * residual, weights, 2 * count + 8)
    # On a cell |error_ij| <= |r_i||d_j| + |d_i||r_j| + |d_i||d_j|, |d| <= error sqrt(count); by Cauchy-Schwarz that is at
    # most sqrt(size_i size_j) with size = balance r^2 + d^2 / balance + d^2, whatever the balance of the cell.
    present = scale[:, None] * np.sum(residual**2, axis=1)
    wrong = scale[:, None] * count * error**2
    balance = np.sqrt((np.max(wrong, axis=1) + 1e-300) / (np.max(present, axis=1) + 1e-300))[:, None]
    size = second.size + 1.01 * np.sum(balance * present + wrong / balance + wrong, axis=0)
    # The forms are those of the computed gradient metric; the flux metric is its inverse up to metric_error.
    energy = flux.energy_gram(fields)
    inverse = 1 + 4 * pencil.metric_error
    return Gram(inverse * energy.matrix, inverse * energy.size) + Gram(second.matrix, size)
