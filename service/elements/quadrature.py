"""Quadrature on the reference simplex with positive weights."""

from typing import Any

import numpy as np
from numpy.typing import NDArray

Rule = tuple[NDArray[Any], NDArray[Any]]


def gauss(count: int) -> Rule:
    """Gauss-Legendre nodes and weights on (0, 1), exact up to degree 2 count - 1."""
    nodes, weights = np.polynomial.legendre.leggauss(count)
    return (nodes + 1) / 2, weights / 2


def precise_gauss(count: int) -> Rule:
    """The same rule in NumPy's longest floating-point type, by Newton's method on the Legendre recurrence."""
    x: NDArray[Any] = np.polynomial.legendre.leggauss(count)[0].astype(np.longdouble)
    slope = np.ones_like(x)
    for _ in range(3):
        before, now = np.ones_like(x), x.copy()
        for n in range(1, count):
            before, now = now, ((2 * n + 1) * x * now - n * before) / (n + 1)
        slope = count * (x * now - before) / (x * x - 1)
        x = x - now / slope
    return (x + 1) / 2, 1 / ((1 - x * x) * slope * slope)


def conical(dimension: int, interval: Rule) -> Rule:
    """Product rule on the unit simplex from one on (0, 1), through the collapsed coordinates.

    Parameters
    ----------
    dimension : d >= 1.
    interval : nodes and weights on (0, 1) exact to degree q; the result is exact to degree q - d + 1.

    Returns
    -------
    (d, n) points and (n,) weights (Stroud, Approximate Calculation of Multiple Integrals, 1971).
    """
    nodes, weights = interval
    points, measure = nodes[None, :], weights
    for _ in range(1, dimension):
        # The simplex over the next coordinate t is the previous one shrunk by 1 - t.
        shrink = 1 - nodes
        points = np.concatenate(
            [
                (points[:, :, None] * shrink).reshape(len(points), -1),
                (0 * measure[:, None] + nodes).reshape(1, -1),
            ]
        )
        measure = (measure[:, None] * (weights * shrink ** len(points[:-1]))).ravel()
    return points, measure


def simplex_rule(dimension: int, degree: int, precise: bool = False) -> Rule:
    """Points (d, n) and positive weights (n,) exact for polynomials of ``degree`` on the unit simplex."""
    rule = precise_gauss if precise else gauss
    return conical(dimension, rule((degree + dimension + 1) // 2))
