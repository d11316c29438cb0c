"""Bounds for what floating-point arithmetic adds: the few rules that every allowance is made of.

Source: N. J. Higham, Accuracy and Stability of Numerical Algorithms, 2nd ed. (2002), chapter 3.
"""

import math

import numpy as np
from numpy.typing import NDArray

UNIT = 2.0**-53
"""Unit roundoff of IEEE double arithmetic."""


def gamma(operations: int) -> float:
    """gamma_n >= n u / (1 - n u): relative error after n roundings, itself rounded upward."""
    return 1.01 * operations * UNIT


def exact_sum(terms: NDArray[np.float64]) -> NDArray[np.float64]:
    """Sums over the first axis, each correctly rounded."""
    columns = terms.reshape(len(terms), -1).T
    return np.array([math.fsum(column) for column in columns]).reshape(terms.shape[1:])


def down(value: float, steps: int = 4) -> float:
    """A number below ``value`` by a few units in the last place."""
    return value - abs(value) * steps * 2 * UNIT


def up(value: float, steps: int = 4) -> float:
    """A number above ``value`` by a few units in the last place."""
    return value + abs(value) * steps * 2 * UNIT
