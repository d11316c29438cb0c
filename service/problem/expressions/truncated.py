"""Polynomials with a remainder: truncated arithmetic on many cells at once, rounding included.

A ``Truncated`` stands for every function f of s in [-1, 1]^d with |f(s) - P(s)| <= radius, P being the
polynomial with exactly the stored coefficients. Operations return one for the exact result.

Rounding. A sum of n products of doubles is off by at most gamma_n times the sum of their absolute
values, apart from underflow (Higham, Accuracy and Stability of Numerical Algorithms, 2nd ed. 2002,
section 3.1). Monomials are at most 1 in size on [-1, 1]^d, so the errors of coefficients simply add up
in the radius. Radii are made of sums and products of numbers >= 0 in fewer than 1,000 roundings, which
the factor ABOVE covers; UNDERFLOW covers all that can be lost to underflow in one operation.
"""

from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from service.problem.expressions.monomials import count, exponents, product_runs
from service.problem.expressions.rounding import QUIETLY, UNIT, Floats

ABOVE = 1 + 2.0**-40
UNDERFLOW = 2.0**-1000


@dataclass(frozen=True)
class Truncated:
    """Polynomials with remainders on n cells (or one, which stands for all cells alike).

    coefficients : shape (count(dimension, degree), n), rows in the order of ``monomials``; finite.
    radius : shape (n,), >= 0; infinite where nothing is known, the coefficients being 0 there.
    dimension : number of local variables.
    degree : of the polynomials stored, at most the degree of truncation.
    """

    coefficients: Floats
    radius: Floats
    dimension: int
    degree: int

    @property
    def cells(self) -> int:
        """Number of cells, 1 where all are alike."""
        return max(int(self.coefficients.shape[1]), len(self.radius))

    @property
    @QUIETLY
    def size(self) -> Floats:
        """Bounds of |P| on [-1, 1]^d, shape (n,)."""
        return np.asarray(ABOVE * np.sum(np.abs(self.coefficients), axis=0))

    def padded(self, degree: int) -> Floats:
        """The coefficients with zeros up to a degree, as a new array with a column for every cell."""
        rows = np.zeros((count(self.dimension, degree), self.cells))
        rows[: len(self.coefficients)] = self.coefficients
        return rows

    def deviation(self) -> "Truncated":
        """The same without its constant term."""
        rows = self.coefficients.copy()
        rows[0] = 0.0
        return Truncated(rows, self.radius, self.dimension, self.degree)

    @QUIETLY
    def ends(self) -> tuple[Floats, Floats]:
        """Lower and upper bounds, shape (n,): even monomials lie in [0, 1], others in [-1, 1]."""
        even = np.all(exponents(self.dimension, self.degree)[1:] % 2 == 0, axis=1)
        rest = self.coefficients[1:]
        odd = np.sum(np.abs(rest[~even]), axis=0)
        slack = ABOVE * self.radius + 2.0**-40 * self.size + UNDERFLOW
        lower = self.coefficients[0] - (odd - np.sum(np.minimum(rest[even], 0.0), axis=0)) - slack
        upper = self.coefficients[0] + (odd + np.sum(np.maximum(rest[even], 0.0), axis=0)) + slack
        return lower, upper


@QUIETLY
def add(p: Truncated, q: Truncated) -> Truncated:
    """p + q. A rounded sum is off by at most UNIT times itself, and only where both have a coefficient."""
    short, long = sorted((p, q), key=lambda one: one.degree)
    common = len(short.coefficients)
    rows = np.empty((len(long.coefficients), max(p.cells, q.cells)))
    rows[:] = long.coefficients
    rows[:common] += short.coefficients
    rounding = UNIT * np.sum(np.abs(rows[:common]), axis=0)
    return settled(rows, ABOVE * (p.radius + q.radius + rounding), long)


def negated(p: Truncated) -> Truncated:
    """-p, exactly."""
    return Truncated(-p.coefficients, p.radius, p.dimension, p.degree)


@QUIETLY
def multiply(p: Truncated, q: Truncated, most: int) -> Truncated:
    """p q with its terms above the degree ``most`` moved into the remainder."""
    p, q = sorted((p, q), key=lambda one: one.degree)
    degree = min(p.degree + q.degree, most)
    shape = Truncated(p.coefficients, p.radius, p.dimension, degree)
    rows = np.zeros((count(p.dimension, degree), max(p.cells, q.cells)))
    scratch = np.empty((len(q.coefficients), rows.shape[1]))
    for i, several, target in product_runs(p.dimension, p.degree, q.degree, degree):
        part = scratch[: several.stop - several.start]
        np.multiply(p.coefficients[i], q.coefficients[several], out=part)
        rows[target] += part
    by_degree, others = degree_sizes(p), degree_sizes(q)
    size, other = np.sum(by_degree, axis=0), np.sum(others, axis=0)
    gamma = 1.01 * (len(p.coefficients) + 1) * UNIT
    radius = size * q.radius + other * p.radius + p.radius * q.radius + gamma * size * other + UNDERFLOW
    for low in range(max(degree + 1 - q.degree, 0), p.degree + 1):
        radius = radius + by_degree[low] * np.sum(others[max(degree + 1 - low, 0) :], axis=0)
    return settled(rows, ABOVE * radius, shape)


def degree_sizes(p: Truncated) -> Floats:
    """Sums of the absolute coefficients of each total degree, shape (degree + 1, n)."""
    sizes = np.abs(p.coefficients)
    ends = [count(p.dimension, degree) for degree in range(-1, p.degree + 1)]
    return np.array([np.sum(sizes[a:b], axis=0) for a, b in pairwise(ends)])


@QUIETLY
def settled(rows: Floats, radius: Floats, like: Truncated) -> Truncated:
    """The pair, with nothing known (0 and an infinite radius) on cells where it is not finite."""
    lost = ~np.isfinite(np.sum(rows, axis=0) + radius)
    if lost.any():
        rows = np.where(lost, 0.0, rows)
        radius = np.where(lost, np.inf, radius)
    return Truncated(rows, radius, like.dimension, like.degree)


@QUIETLY
def widened(p: Truncated, amount: Floats) -> Truncated:
    """p with a larger remainder; an amount that is not a number makes it infinite."""
    return settled(p.coefficients, ABOVE * (p.radius + amount), p)


def select(flags: NDArray[np.bool_], p: Truncated, q: Truncated) -> Truncated:
    """p on the cells that are flagged, q on the others."""
    degree = max(p.degree, q.degree)
    rows = np.where(flags, p.padded(degree), q.padded(degree))
    return Truncated(rows, np.where(flags, p.radius, q.radius), p.dimension, degree)
