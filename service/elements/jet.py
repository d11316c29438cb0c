"""Values together with first derivatives, so that polynomials are written once and differentiated exactly.

A jet is an array of shape (1 + m, q): row 0 holds a function's values at q points, rows 1..m its derivatives
with respect to m variables. The code runs for any number type NumPy can hold: doubles in the service,
multiple-precision numbers in the tests that check the doubles.
"""

from collections.abc import Sequence
from functools import reduce
from typing import Any

import numpy as np
from numpy.typing import NDArray

Jet = NDArray[Any]


def coordinates(points: Jet) -> list[Jet]:
    """Jets of the m coordinate functions at ``points`` (m, q)."""
    m, q = points.shape
    jets = np.zeros((m, 1 + m, q), dtype=points.dtype) + 0 * points[0, 0]
    jets[:, 0] = points
    for i in range(m):
        jets[i, 1 + i] += 1
    return list(jets)


def constant(value: Any, like: Jet) -> Jet:
    """The jet of a constant function."""
    jet = 0 * like
    jet[0] = jet[0] + value
    return jet


def times(*factors: Jet) -> Jet:
    """Product rule."""

    def pair(a: Jet, b: Jet) -> Jet:
        product: Jet = a[:1] * b + b[:1] * a
        product[0] = a[0] * b[0]
        return product

    product: Jet = reduce(pair, factors)
    return product


def jacobi(degree: int, alpha: int, beta: int, x: Jet, t: Jet) -> list[Jet]:
    """Homogenised Jacobi polynomials t^n P_n^(alpha, beta)(x / t), n = 0..degree (DLMF 18.9.2)."""
    polynomials = [constant(1, x)]
    if degree >= 1:
        polynomials.append(((alpha + beta + 2) * x + (alpha - beta) * t) / 2)
    tt = times(t, t)
    for n in range(1, degree):
        s = 2 * n + alpha + beta
        lead = 2 * (n + 1) * (n + alpha + beta + 1) * s
        a = (s + 1) * (s + 2) * s
        b = (s + 1) * (alpha * alpha - beta * beta)
        c = 2 * (n + alpha) * (n + beta) * (s + 2)
        linear = times(a * x + b * t, polynomials[n])
        polynomials.append((linear - c * times(tt, polynomials[n - 1])) / lead)
    return polynomials


def simplex_polynomials(degree: int, barycentric: Sequence[Jet], weight: int = 0) -> list[Jet]:
    """A basis of the polynomials of at most ``degree`` on a simplex, in its barycentric coordinates.

    Orthogonal on the simplex for the weight (product of barycentric coordinates)^weight (Proriol 1957; Koornwinder
    1975;
    Dubiner, J. Sci. Comput. 6 (1991)). On the faces of a larger simplex the same polynomials, extended.
    """
    partial = [(0, constant(1, barycentric[0]))]
    total = barycentric[0]
    for i in range(1, len(barycentric)):
        before, total = total, total + barycentric[i]
        extended = []
        for used, polynomial in partial:
            # Behind i coordinates the Jacobian of the collapsed map and the weight raise the exponent.
            exponent = 2 * used + (i - 1) + i * weight
            chain = jacobi(degree - used, exponent, weight, barycentric[i] - before, total)
            extended += [(used + n, times(polynomial, factor)) for n, factor in enumerate(chain)]
        partial = extended
    # By total degree: the first ones span the polynomials of any lower degree.
    return [polynomial for _, polynomial in sorted(partial, key=lambda pair: pair[0])]


def simplex_dimension(dimension: int, degree: int) -> int:
    """Number of polynomials of at most ``degree`` in ``dimension`` variables."""
    count = 1
    for i in range(dimension):
        count = count * (degree + 1 + i) // (i + 1)
    return count
