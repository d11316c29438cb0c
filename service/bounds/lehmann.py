"""Lower bounds of many eigenvalues at once from trial functions, fluxes, and one rough bound of the next
eigenvalue.

Lehmann (Math. Z. 1949/50), Goerisch (1980s); H. Behnke and F. Goerisch in Topics in Validated Computations (1994).
"""

import numpy as np
from numpy.typing import NDArray

from service.bounds.flux import FluxSpace
from service.bounds.gram import Gram
from service.bounds.minorant import poincare_constants
from service.bounds.ritz import TrialSpace
from service.bounds.rounding import UNIT, down, exact_sum, gamma, up
from service.elements.reference import REFERENCE_ERROR, magnitude

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
    """Proved upper bounds of tau_1..tau_m: the Ritz values of m trial functions.

    energy, mass : inner products in a form above A and a form below B.
    """
    count = len(energy.matrix)
    above = energy.matrix + energy.slack
    below = mass.matrix - mass.slack
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
    slack = energy.slack + 2 * rho * mass.slack + rho**2 * dual.slack
    # Larger forms move every negative eigenvalue toward zero, hence the bounds down.
    solved = definite_pencil(left + 1.0001 * slack, right + 1.0001 * slack)
    if solved is None:
        return nothing
    values, _, e, f = solved
    if not values[-1] + e < 0:
        return nothing
    shares = [(v + e) / (1 + f) for v in values]
    ascending = [down(rho - up(rho / (1 - mu), 8), 8) for mu in shares]
    return np.array(ascending[::-1])


def goerisch_gram(trial: TrialSpace, flux: FluxSpace, functions: Array, ratios: Array) -> Gram:
    """Inner products of w_i = (G^-1 s_i, (b u_i + div s_i) / p) for trial functions with approximate ratios A/B.

    Coefficients are constant on each cell, there are no facet terms, and p > 0.

    s_i has the divergence (p - t_i b) / t_i u_i that makes w_i = (grad u_i, u_i) / t_i for an eigenfunction, and
    least energy. <w_i, (grad v, v)> = B(u_i, v) holds for every such field.
    """
    energy, weight = trial.pencil.energy, trial.pencil.weight
    moments = trial.reference.moments @ functions
    jacobian = energy.jacobian[:, None, None]
    p, b = energy.potential[:, :, None], weight.potential[:, :, None]
    fields = flux.equilibrate(jacobian * (p / ratios - b) * moments)
    spread, doubt = flux.divergence_moments(fields)
    # Beyond the mean, what the divergence may be off by is that of a small field without flow out of the cell.
    lost = np.sqrt(np.sum(doubt[:, 1:] ** 2, axis=1) / energy.jacobian[:, None])
    strayed = 1.01 * np.linalg.norm(poincare_constants(energy)[:, None] * lost, axis=0)
    doubt[:, 1:] = 0.0
    residual = b * jacobian * moments + spread
    relative = 2 * REFERENCE_ERROR + gamma(2 * functions.shape[1] + 8)
    doubt = doubt + relative * b * jacobian * (magnitude(trial.reference.moments) @ np.abs(functions))
    doubt = doubt + 4 * UNIT * np.abs(residual)
    # Moments against orthonormal polynomials: the squared norm is their sum of squares over p |det J|.
    scaled = residual / (p * jacobian)
    matrix = exact_sum(scaled.swapaxes(1, 2) @ residual)
    size, blur = np.abs(scaled), doubt / (p * jacobian)
    error = blur.swapaxes(1, 2) @ (np.abs(residual) + doubt)
    error = error + error.swapaxes(1, 2) + gamma(residual.shape[1] + 8) * (size.swapaxes(1, 2) @ np.abs(residual))
    error = exact_sum(error)
    steep = flux.energy_gram(fields)
    length = np.sqrt(np.diag(steep.matrix) + np.diag(steep.error)) + strayed
    error = error + np.outer(length, strayed) + np.outer(strayed, length)
    # The energy is that of the computed metric of gradients, whose inverse the metric of fluxes is but for an error.
    return steep.scaled(1 + flux.metric_error) + Gram((matrix + matrix.T) / 2, 1.01 * error)
