"""Singular exponents where materials of different diffusion meet in a point.

In sectors with constant κ_j around a point, −∇·(κ∇u) = 0 has the solutions u = r^α Φ(θ) with
Φ'' + α²Φ = 0 in each sector, Φ and κΦ' continuous, and Φ = 0 (Dirichlet), κΦ' = 0 (Neumann) on the
outer rays or, all round, periodicity: R. B. Kellogg, On the Poisson equation with intersecting
interfaces, Applicable Analysis 4 (1975) 101–129; S. Nicaise, A.-M. Sändig, General interface problems
I, Math. Methods Appl. Sci. 17 (1994) 395–429. With contrasts large enough α is as small as one likes.

λ = α² are the eigenvalues of −(κΦ')' = λκΦ. Between outer rays they are found by the Prüfer angle
arctan(κΦα/(κΦ')), which αω is added to in a sector of angle ω, which jumps in a monotone way without
passing a multiple of π/2 between sectors, and which grows with α. All round the transfer matrix T of
(Φ, κΦ'/α) has determinant 1, and 2 − tr T vanishes at the eigenvalues λ₁ ≤ λ₂ < λ₃ ≤ λ₄ < …; the
eigenvalues μ_n of the ring that is cut open with Φ = 0 on the cut separate them: 2 − tr T is positive
at μ₁, μ₃, …, and λ_{2k−1} ≤ μ_{2k} ≤ λ_{2k} < μ_{2k+1} (W. Magnus, S. Winkler, Hill's Equation (1966),
part I). So every search has one sign change, and double eigenvalues are not overlooked.
"""

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

HIGHEST = 2.0
"""Exponents from here on are left out: the gradient of r^α vanishes like r there, or faster."""

_NEAR_INTEGER = 1e-6
_HALVINGS = 60


def transmission_exponents(
    widths: NDArray[np.float64],
    diffusion: NDArray[np.float64],
    closed: NDArray[np.bool_],
    dirichlet: NDArray[np.bool_],
) -> NDArray[np.float64]:
    """All positive exponents α < 2 at each vertex with their multiplicities, ascending, (v, k).

    Rows are filled up with 2, and there is one column at least. Exponents within 10⁻⁶ of an integer count
    as that integer: whether a function is a polynomial in each sector is not a question of rounding.

    Parameters
    ----------
    widths : (v, s) angles of the sectors at each vertex, counter-clockwise; may be 0.
    diffusion : (v, s) κ > 0 in each sector, any unit.
    closed : (v,) whether the sectors go all round; their angles then add up to 2π.
    dirichlet : (v, 2) whether a Dirichlet condition holds on the first and the last ray (otherwise
        Neumann); of no matter where the sectors go all round.
    """
    fixed = dirichlet | closed[:, None]
    first = np.where(fixed[:, 0], 0.0, np.pi / 2)
    target = np.where(fixed[:, 1], 0.0, np.pi / 2)
    target = np.where(target > first, target, target + np.pi)
    reached = _prufer_angle(np.full((len(first), 1), HIGHEST), first, widths, diffusion)[:, 0]
    number = int(np.floor((reached - target) / np.pi).max(initial=0.0)) + 1
    targets = target[:, None] + np.pi * np.arange(number)
    low, high = np.zeros_like(targets), np.full_like(targets, HIGHEST)
    found = _bisect(low, high, lambda alpha: _prufer_angle(alpha, first, widths, diffusion) < targets)
    if closed.any():
        found[closed] = _all_round(found[closed], widths[closed], diffusion[closed])
    nearest = np.rint(found)
    return np.where((np.abs(found - nearest) < _NEAR_INTEGER) & (nearest > 0), nearest, found)


def _all_round(
    cut: NDArray[np.float64], widths: NDArray[np.float64], diffusion: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Exponents of the closed ring, one between each of μ₁, μ₂, … and the next, (v, k)."""
    following = np.column_stack([cut[:, 1:], np.full(len(cut), HIGHEST)])
    odd = np.arange(cut.shape[1]) % 2 == 0
    return _bisect(cut, following, lambda alpha: (_discriminant(alpha, widths, diffusion) > 0) == odd)


def _bisect(
    low: NDArray[np.float64],
    high: NDArray[np.float64],
    below: Callable[[NDArray[np.float64]], NDArray[np.bool_]],
) -> NDArray[np.float64]:
    """Where ``below`` changes from true to false, element by element."""
    for _ in range(_HALVINGS):
        middle = (low + high) / 2
        left = below(middle)
        low, high = np.where(left, middle, low), np.where(left, high, middle)
    return (low + high) / 2


def _prufer_angle(
    alpha: NDArray[np.float64],
    first: NDArray[np.float64],
    widths: NDArray[np.float64],
    diffusion: NDArray[np.float64],
) -> NDArray[np.float64]:
    """Prüfer angle on the last ray for each α, (v, k), where it is ``first``, (v,), on the first ray."""
    angle = np.repeat(first[:, None], alpha.shape[1], axis=1)
    before = diffusion[:, :1]
    for width, here in zip(widths.T[:, :, None], diffusion.T[:, :, None], strict=True):
        whole = np.pi * np.rint(angle / np.pi)
        rest = angle - whole
        angle = whole + np.arctan2(here / before * np.sin(rest), np.cos(rest)) + alpha * width
        before = here
    return angle


def _discriminant(
    alpha: NDArray[np.float64], widths: NDArray[np.float64], diffusion: NDArray[np.float64]
) -> NDArray[np.float64]:
    """2 − tr T for each α, (v, k)."""
    one, zero = np.ones_like(alpha), np.zeros_like(alpha)
    (a, b), (c, d) = (one, zero), (zero, one)
    scale = np.sqrt(diffusion.min(axis=1) * diffusion.max(axis=1))
    for width, kappa in zip(widths.T[:, :, None], (diffusion.T / scale)[:, :, None], strict=True):
        cos, sin = np.cos(alpha * width), np.sin(alpha * width)
        a, c = cos * a + sin / kappa * c, cos * c - sin * kappa * a
        b, d = cos * b + sin / kappa * d, cos * d - sin * kappa * b
    return 2 - (a + d)
