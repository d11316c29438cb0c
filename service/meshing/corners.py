"""How singular the Laplacian's eigenfunctions are at each corner, and how many layers that asks for.

Near a corner of interior angle ω the solution is a smooth function plus terms r^{kα}, k = 1, 2, …
(k odd in the mixed case), with α = π/ω where the same condition holds on both edges and α = π/(2ω)
where Dirichlet meets Neumann: P. Grisvard, Elliptic Problems in Nonsmooth Domains (1985), sections
4.4 and 5.1. When α is an integer the domain is a piece of a reflected one and nothing is singular.
Layers of elements that shrink geometrically towards the corner restore the exponential convergence
of the p-version: I. Babuška, B. Q. Guo, The h-p version of the finite element method for domains
with curved boundaries, SIAM J. Numer. Anal. 25 (1988) 837–861.
"""

import numpy as np
from numpy.typing import NDArray

LAYER_RATIO = 0.25
"""σ, the size of a layer relative to the next outer one: a power of two, so that scaling is exact."""

ORDER = 5
"""Polynomial order p for which the layers are planned."""

_SHARE = 0.1

_SMALLEST = 1e-14
"""Size of elements, relative to that of the domain, below which rounding of fluxes costs more than layers gain."""


def interior_angles(points: NDArray[np.float64], edges: NDArray[np.int64]) -> NDArray[np.float64]:
    """Angle ω in (0, 2π] between the two edges at every vertex, measured inside the domain, (n,).

    2π at points that no edge uses.

    Parameters
    ----------
    points : (n, 2) vertices, any unit.
    edges : (m, 2) start and end of each edge, the domain on its left; a vertex is the start of one edge
        and the end of one, or no edge uses it.
    """
    before, after = _neighbours(edges, len(points))
    ahead = points[after] - points
    back = points[before] - points
    cross = ahead[:, 0] * back[:, 1] - ahead[:, 1] * back[:, 0]
    dot = (ahead * back).sum(axis=1)
    angle: NDArray[np.float64] = np.arctan2(cross, dot)
    angle[angle <= 0] += 2 * np.pi
    return angle


def singular_exponents(
    angles: NDArray[np.float64], edges: NDArray[np.int64], dirichlet: NDArray[np.bool_]
) -> NDArray[np.float64]:
    """Smallest positive exponent α of the Laplacian at every vertex, (n,).

    Parameters
    ----------
    angles : (n,) interior angles ω.
    edges : (m, 2) start and end of each edge.
    dirichlet : (m,) whether the edge carries a Dirichlet condition (a Neumann condition otherwise).
    """
    outgoing = np.zeros(len(angles), dtype=bool)
    incoming = np.zeros(len(angles), dtype=bool)
    outgoing[edges[:, 0]] = dirichlet
    incoming[edges[:, 1]] = dirichlet
    return np.where(outgoing == incoming, 1.0, 0.5) * np.pi / angles


def layer_counts(exponents: NDArray[np.float64], sizes: NDArray[np.float64], target: float) -> NDArray[np.int64]:
    """Number n of layers that each corner needs, 0 where none, (n,).

    The smallest n ≥ 0 with w² (hσⁿ)^{2α} p^{-4α} ≤ 0.1 · target: the relative eigenvalue error of the
    p-version on elements of size hσⁿ at r^α. The weight w = min(1, 2|α − m|), m the nearest positive
    integer, is 1 for exponents ≤ 1/2 and vanishes where r^α is smooth: there the singular term is
    w times what remains between r^α and r^m. Elements never get smaller than 1e-14 of the domain.

    Parameters
    ----------
    exponents : singular exponents α; arrays of any shape that fit together.
    sizes : size h of the elements at the corner relative to the distance over which the solution
        changes there, usually the diameter of the domain (see ``scales``).
    target : relative accuracy wanted in the eigenvalue.
    """
    weight = np.minimum(1.0, 2 * np.abs(exponents - np.maximum(1.0, np.rint(exponents))))
    smooth = weight < 1e-9
    safe = np.where(smooth, 1.0, weight)
    # Size below which the corner element may be left alone: w² x^{2α} p^{-4α} = 0.1 target.
    allowed = ORDER**2 * (_SHARE * target / safe**2) ** (0.5 / exponents)
    layers = np.ceil(np.log(sizes / allowed) / -np.log(LAYER_RATIO))
    most = np.floor(np.log(sizes / _SMALLEST) / -np.log(LAYER_RATIO))
    return np.where(smooth, 0, np.clip(layers, 0, np.maximum(most, 0))).astype(np.int64)


def _neighbours(edges: NDArray[np.int64], count: int) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Previous and next vertex of every vertex along its loop, the vertex itself where there is none."""
    before, after = np.arange(count), np.arange(count)
    before[edges[:, 1]] = edges[:, 0]
    after[edges[:, 0]] = edges[:, 1]
    return before, after
