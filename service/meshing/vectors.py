"""Plane vectors, row by row."""

import numpy as np
from numpy.typing import NDArray


def cross(first: NDArray[np.float64], second: NDArray[np.float64]) -> NDArray[np.float64]:
    """z-components of the cross products of vectors, (..., 2) each."""
    return np.asarray(first[..., 0] * second[..., 1] - first[..., 1] * second[..., 0])


def turn(first: NDArray[np.float64], second: NDArray[np.float64]) -> NDArray[np.float64]:
    """Angle in [0, 2π) by which ``first`` turns counter-clockwise to point along ``second``."""
    angle: NDArray[np.float64] = np.arctan2(cross(first, second), (first * second).sum(axis=-1))
    angle[angle < 0] += 2 * np.pi
    return angle
