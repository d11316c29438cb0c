"""Monomials of several variables in graded order, and where their products land.

The order is by total degree, then by falling exponent of the first variable, then of the second, and
so on: 1, s, t, s^2, s t, t^2, ... It does not depend on the largest degree in use, so a polynomial of
low degree is the beginning of one of higher degree.
"""

from functools import lru_cache
from math import comb

import numpy as np
from numpy.typing import NDArray


def count(dimension: int, degree: int) -> int:
    """Number of monomials of at most ``degree`` (none below degree 0)."""
    return comb(degree + dimension, dimension) if degree >= 0 else 0


@lru_cache(maxsize=64)
def exponents(dimension: int, degree: int) -> NDArray[np.int64]:
    """Exponents of the monomials of at most ``degree``, shape (count, dimension); do not modify."""
    rows = [row for total in range(degree + 1) for row in _compositions(dimension, total)]
    table = np.array(rows, dtype=np.int64).reshape(len(rows), dimension)
    table.setflags(write=False)
    return table


def _compositions(parts: int, total: int) -> list[tuple[int, ...]]:
    """All ways to write ``total`` as an ordered sum of so many parts >= 0."""
    if parts == 1:
        return [(total,)]
    return [
        (first, *rest)
        for first in range(total, -1, -1)
        for rest in _compositions(parts - 1, total - first)
    ]


@lru_cache(maxsize=1024)
def product_runs(
    dimension: int, left: int, right: int, degree: int
) -> tuple[tuple[int, slice, slice], ...]:
    """How to multiply polynomials of degrees ``left`` and ``right``, keeping monomials up to ``degree``.

    Each entry (i, several, target) says: the left coefficient i times the right coefficients
    ``several`` adds to the product's coefficients ``target``.
    """
    table = [tuple(row) for row in exponents(dimension, degree).tolist()]
    position = {row: index for index, row in enumerate(table)}
    runs: list[tuple[int, slice, slice]] = []
    for i in range(count(dimension, min(left, degree))):
        partners = count(dimension, min(right, degree - sum(table[i])))
        targets = [
            position[tuple(a + b for a, b in zip(table[i], table[j], strict=True))]
            for j in range(partners)
        ]
        start = 0
        for j in range(1, partners + 1):
            if j == partners or targets[j] != targets[j - 1] + 1:
                target = slice(targets[start], targets[j - 1] + 1)
                runs.append((i, slice(start, j), target))
                start = j
    return tuple(runs)
