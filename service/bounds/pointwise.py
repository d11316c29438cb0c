"""What coefficients prove point by point: how strongly a bilinear form couples values and gradients in a norm.

A polynomial matrix is, everywhere on a cell, a convex combination of its control points, and |y . N x| <= s |x|_H |y|_H
is the convex condition [[s H, N], [N^T, s H]] >= 0: it holds everywhere where it holds at the control points.
"""

import math
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from service.bounds.proof import Prover
from service.bounds.rounding import UNIT, up
from service.forms.bilinear import Bilinear
from service.forms.coefficients import widened
from service.forms.form import Form, Pencil
from service.forms.modes import coefficient_modes, control_points

Array = NDArray[np.float64]

SLACK = 1e-13
"""Relative allowance for the rounding of control points and of small well-conditioned eigenvalue problems."""


def controls(modes: Array, dimension: int) -> Array:
    """Control points (n, c, ...) of polynomials given by modes (n, m, ...)."""
    return np.asarray(np.einsum("cm,nm...->nc...", control_points(dimension, modes.shape[1]), modes))


def slack(gradient: Array) -> float:
    """``SLACK``, and what dividing by the square roots of matrices (..., d, d) adds: their condition times the unit."""
    values = np.linalg.eigvalsh(gradient)
    return SLACK + 64 * UNIT * float(np.max(values[..., -1] / values[..., 0]))


def coupling(form: Bilinear, norm: Form, skew: bool) -> tuple[Array, Array, Array]:
    """Control points N, H (nc, c, d + 1, d + 1) of the form and the squared norm, and (nc, 3) errors of coefficients.

    With x = (grad u, u), y = (grad v, v): a(u, v) = int y . N x but for facet terms, |u|^2 = int x . H x. With ``skew``
    the form is one of ``bilinear(..., skew=True)``.
    """
    d = form.mesh.dimension
    norm = norm.moved(-1.0)
    parts = [form.diffusion, form.velocity, form.reaction, norm.diffusion, norm.potential]
    width = max(part.shape[1] for part in parts)
    k, b, c, g, w = (controls(widened(part, width), d) for part in parts)
    matrix = np.zeros((*k.shape[:2], d + 1, d + 1))
    heavy = np.zeros_like(matrix)
    matrix[:, :, :d, :d], matrix[:, :, d, d] = k, c
    matrix[:, :, d, :d] = b / 2 if skew else b
    if skew:
        matrix[:, :, :d, d] = -b / 2
    heavy[:, :, :d, :d], heavy[:, :, d, d] = g, w
    return matrix, heavy, np.stack([form.diffusion_error, form.velocity_error, form.reaction_error], axis=1)


def strongest(form: Bilinear, norm: Form, skew: bool, friedrichs: float | None = None) -> float:
    """A bound of |a(u, v)| / (|u| |v|) without facet terms; infinite where the cells are too coarse to tell.

    friedrichs : C with |u|_L2 <= C |u|, where the norm has no term without derivatives.
    """
    d = form.mesh.dimension
    matrix, heavy, error = coupling(form, norm, skew)
    try:
        if friedrichs is None:
            root = np.linalg.inv(np.linalg.cholesky(heavy))
            size = np.linalg.norm(root @ matrix @ root.swapaxes(2, 3), 2, axis=(2, 3)).max(axis=1)
            flat = 1 / np.linalg.eigvalsh(heavy[:, :, :d, :d])[:, :, 0].min(axis=1)
            low = 1 / heavy[:, :, d, d].min(axis=1)
            size = size + error[:, 0] * flat + error[:, 1] * np.sqrt(flat * low) + error[:, 2] * low
            return up(float(np.max(size)) * (1 + slack(heavy[:, :, :d, :d])))
        root = np.linalg.inv(np.linalg.cholesky(heavy[:, :, :d, :d]))
    except np.linalg.LinAlgError:
        return math.inf
    flat = 1 / np.linalg.eigvalsh(heavy[:, :, :d, :d])[:, :, 0].min(axis=1)
    steep = np.linalg.norm(root @ matrix[:, :, :d, :d] @ root.swapaxes(2, 3), 2, axis=(2, 3)).max(axis=1)
    mixed = np.linalg.norm(np.einsum("ncij,ncj->nci", root, matrix[:, :, d, :d]), axis=2).max(axis=1)
    plain = np.abs(matrix[:, :, d, d]).max(axis=1)
    first = float(np.max(steep + error[:, 0] * flat))
    second = float(np.max(mixed + error[:, 1] * np.sqrt(flat))) * (2 if skew else 1)
    third = float(np.max(plain + error[:, 2]))
    return up((first + second * friedrichs + third * friedrichs**2) * (1 + slack(heavy[:, :, :d, :d])))


def facet_size(form: Bilinear | Form) -> Array:
    """(nf,) bound of |r| on each facet off the Dirichlet part, 0 elsewhere."""
    worst = np.abs(controls(form.facet, form.mesh.dimension - 1)).max(axis=1) * (1 + SLACK) + form.facet_error
    return np.where(form.dirichlet, 0.0, worst)


def doubt(form: Bilinear, norm: Form, friedrichs: float | None = None) -> float:
    """A bound of what the errors of the coefficients add to |a(u, v)| / (|u| |v|).

    On facets: where |u|^2 - t int e u^2 is proved to have no negative direction, int e |u v| <= |u| |v| / t.
    """
    lower = norm.moved(-1.0)
    least = np.linalg.eigvalsh(lower.diffusion_floor)[:, 0]
    if not np.all(least > 0):
        return math.inf
    flat = 1 / np.sqrt(least)
    floor = lower.potential[:, 0] - lower.potential_swing
    low = np.full(len(flat), friedrichs) if friedrichs is not None else 1 / np.sqrt(floor)
    total = np.max(form.diffusion_error * flat**2)
    total += np.max(form.velocity_error * flat * low) + np.max(form.reaction_error * low**2)
    # The polynomials stand for the coefficients on cells that are off by the uncertainty of the mesh.
    size = strongest(form, norm, False, friedrichs)
    total += 4 * norm.uncertainty * (size + total)
    error = np.where(form.dirichlet, 0.0, form.facet_error) + 4 * norm.uncertainty * facet_size(form)
    return up(float(total)) + facet_doubt(norm, error, size)


def facet_doubt(norm: Form, error: Array, unit: float) -> float:
    """A bound of int error u^2 over facets against |u|^2; infinite where none of those tried, shares of ``unit``, is
    proved."""
    if not np.any(error):
        return 0.0
    none = np.zeros_like(norm.potential[:, :1])
    mass = replace(norm, diffusion=np.zeros_like(norm.diffusion[:, :1]), potential=none, facet=error[:, None])
    pencil = Pencil(norm, replace(mass, diffusion_error=none[:, 0], potential_error=none[:, 0]))
    for share in (1e-9, 1e-7, 1e-5, 1e-3, 1e-2, 1e-1) if math.isfinite(unit) and unit > 0 else ():
        t = 1 / (share * unit)
        if Prover(pencil, 1, t).proves(t, 0):
            return up(1 / t)
    return math.inf


def oscillation(energy: Form, norm: Form) -> float:
    """A number not above the largest ratio of functions that oscillate around a point."""
    ratios, error = swings(energy, norm)
    return float(np.max(ratios[:, :, -1] - error[:, None]))


def smallest_ratio(energy: Form, norm: Form) -> float:
    """A number not below the smallest ratio of functions that oscillate around a point."""
    if not np.any(norm.diffusion):
        return math.inf
    ratios, error = swings(energy, norm)
    return up(float(np.min(ratios[:, :, 0] + error[:, None])))


def least_ratio(energy: Form, norm: Form) -> float:
    """The largest t proved to keep G_energy - t G_norm >= 0 everywhere, by control points."""
    d = energy.mesh.dimension
    if not np.any(norm.diffusion):
        return math.inf if np.all(np.linalg.eigvalsh(energy.diffusion_floor)[:, 0] >= 0) else -math.inf
    width = max(energy.diffusion.shape[1], norm.diffusion.shape[1])
    above, below = (controls(widened(form.diffusion, width), d) for form in (energy, norm))
    try:
        root = np.linalg.inv(np.linalg.cholesky(below))
    except np.linalg.LinAlgError:
        return -math.inf
    ratios = np.linalg.eigvalsh(root @ above @ root.swapaxes(2, 3))
    return float(np.min(ratios[:, :, 0] - slack(below) * np.abs(ratios).max(axis=2)))


def swings(energy: Form, norm: Form) -> tuple[Array, Array]:
    """(nc, d + 1, d) ratios of G at the corners of cells, and a bound (nc,) of their error.

    Functions that oscillate faster and faster, ever closer to a point, have these ratios in the limit.
    """
    d = energy.mesh.dimension
    corners = np.hstack([np.zeros((d, 1)), np.eye(d)])

    def there(form: Form) -> Array:
        values = coefficient_modes(d, form.diffusion.shape[1], corners)
        return np.asarray(np.einsum("mp,nmab->npab", values, form.diffusion))

    below = there(norm.moved(-1.0))
    # Where the cells are too large for the polynomials to be positive nothing is said.
    fair = np.all(np.linalg.eigvalsh(below)[:, :, 0] > 0, axis=1)
    below = np.where(fair[:, None, None, None], below, np.eye(d))
    root = np.linalg.inv(np.linalg.cholesky(below))
    ratios = np.linalg.eigvalsh(root @ there(energy) @ root.swapaxes(2, 3))
    least = np.linalg.eigvalsh(below)[:, :, 0].min(axis=1)
    far = np.abs(ratios).max(axis=(1, 2))
    error = (energy.diffusion_error + 1e-13 * np.linalg.norm(energy.diffusion, axis=(2, 3)).sum(axis=1)) / least
    lost = norm.diffusion_error + 2 * norm.uncertainty * np.linalg.norm(norm.diffusion, axis=(2, 3)).sum(axis=1)
    error = np.where(fair, error, np.inf)
    return np.asarray(ratios), np.asarray(error + far * (2.1 * lost / least + slack(below)))
