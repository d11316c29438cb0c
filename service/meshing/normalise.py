"""From the user's coordinates to mesh coordinates: exact scaling, nearly exact translation."""

from dataclasses import dataclass

import numpy as np
import shapely
from numpy.typing import NDArray
from scipy.spatial.distance import cdist

_CHUNK = 512


@dataclass(frozen=True)
class Frame:
    """Vertices in mesh units and the way back: user = origin + unit · point.

    points : (n, 2) non-negative coordinates, each within a relative 2⁻⁵³ of the true one, because a
        difference of two doubles is rounded once and the scaling by a power of two is exact.
    origin : (2,) the user's coordinates of the mesh origin, the lower left corner of the bounding box.
    unit : length of one mesh unit in the user's length unit, a power of two.
    """

    points: NDArray[np.float64]
    origin: NDArray[np.float64]
    unit: float


def normalise(points: NDArray[np.float64]) -> Frame:
    """Translate to the lower left corner and scale so that the diameter is in [1, 2).

    Parameters
    ----------
    points : (n, 2) vertices in the user's length unit, not all equal.
    """
    origin = points.min(axis=0)
    shifted = points - origin
    rough = int(np.frexp(shifted.max())[1])
    shifted = np.ldexp(shifted, -rough)
    fine = int(np.frexp(diameter(shifted))[1]) - 1
    return Frame(np.ldexp(shifted, -fine), origin, float(np.ldexp(1.0, rough + fine)))


def on_hosts(points: NDArray[np.float64], hosts: NDArray[np.int64]) -> NDArray[np.float64]:
    """Dividing vertices placed on their edges, (n, 2): A + t (B - A) from the ends of ``hosts`` in mesh units.

    The t that the given coordinates suggest, clipped to (0, 1), defines where the vertex is; what is computed
    is off by three roundings of numbers no larger than A and B.
    """
    if not len(hosts):
        return points
    start, side = points[hosts[:, 0]], points[hosts[:, 1]] - points[hosts[:, 0]]
    length = np.einsum("ij,ij->i", side, side)
    inside = length > 0
    share = np.einsum("ij,ij->i", points - start, side) / np.where(inside, length, 1.0)
    return np.where(inside[:, None], start + np.clip(share, 0.0, 1.0)[:, None] * side, points)


def diameter(points: NDArray[np.float64]) -> float:
    """Largest distance between two of the points, (n, 2), in their own unit."""
    hull = shapely.get_coordinates(shapely.convex_hull(shapely.multipoints(points)))
    blocks = range(0, len(hull), _CHUNK)
    return max(float(cdist(hull[start : start + _CHUNK], hull).max()) for start in blocks)
