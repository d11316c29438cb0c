"""Sizes and shapes of cells, from spans alone so that they are right in the smallest layers too."""

import math

import numpy as np
from numpy.typing import NDArray

from service.meshing.mesh import Mesh


def edge_vectors(mesh: Mesh) -> NDArray[np.float64]:
    """Vectors along all edges of every cell, (nc, d(d+1)/2, d), in mesh units.

    Edge from vertex i to vertex j, pairs i < j in lexicographic order.
    """
    places = np.concatenate([np.zeros_like(mesh.spans[:, :, :1]), mesh.spans], axis=2)
    first, second = np.triu_indices(mesh.dimension + 1, k=1)
    return np.asarray((places[:, :, second] - places[:, :, first]).swapaxes(1, 2))


def longest_edges(mesh: Mesh) -> NDArray[np.float64]:
    """Length of the longest edge of every cell in mesh units, (nc,)."""
    return np.asarray(np.sqrt((edge_vectors(mesh) ** 2).sum(axis=2).max(axis=1)))


def volumes(mesh: Mesh) -> NDArray[np.float64]:
    """Area (volume) of every cell in square (cubic) mesh units, (nc,)."""
    return np.asarray(np.abs(np.linalg.det(mesh.spans)) / math.factorial(mesh.dimension))


def flatness(mesh: Mesh) -> NDArray[np.float64]:
    """Longest edge over smallest height of every cell, (nc,): 2/√3 for an equilateral triangle.

    The height over the facet opposite to vertex i is 1/|∇λ_i|, λ_i the barycentric coordinate.
    """
    rows = np.linalg.inv(mesh.spans)
    slopes = np.concatenate([rows, -rows.sum(axis=1, keepdims=True)], axis=1)
    return np.asarray(longest_edges(mesh) * np.sqrt((slopes**2).sum(axis=2).max(axis=1)))
