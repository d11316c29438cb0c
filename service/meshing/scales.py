"""Over which distance the solution changes near each vertex: short where a Dirichlet part is small.

Around a Dirichlet part of diameter D, far smaller than the domain, the solution behaves like log(r/D)
out to the next boundary, so the energy at distance r, between r and 2r, hardly depends on r ≥ D: the
plane has no smallest scale (this is why its capacities are logarithmic). A corner at distance r from
the part then counts like a corner of a domain of diameter max(r, D).
"""

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components
from scipy.spatial import cKDTree


def local_scales(
    points: NDArray[np.float64], edges: NDArray[np.int64], dirichlet: NDArray[np.bool_]
) -> NDArray[np.float64]:
    """min(1, min over connected Dirichlet parts of max(diameter, distance)) for every vertex, (n,).

    Diameters are taken of bounding boxes, distances to vertices of the part, which is within a factor
    of two; parts of diameters within a factor √2 count as one.

    Parameters
    ----------
    points : (n, 2) vertices in mesh units.
    edges : (n, 2) start and end of each edge.
    dirichlet : (n,) whether the edge carries a Dirichlet condition.
    """
    scales = np.ones(len(points))
    held = edges[dirichlet]
    if not len(held):
        return scales
    graph = coo_array((np.ones(len(held)), (held[:, 0], held[:, 1])), shape=(len(points), len(points)))
    label = connected_components(graph, directed=False)[1]
    low, high = np.full((len(points), 2), np.inf), np.full((len(points), 2), -np.inf)
    np.minimum.at(low, label, points)
    np.maximum.at(high, label, points)
    extent = np.hypot(*(high - low)[label].T)
    members = np.unique(held)
    members = members[extent[members] < 1]
    octave = np.floor(2 * np.log2(extent[members]))
    for value in np.unique(octave):
        group = members[octave == value]
        distance, _ = cKDTree(points[group]).query(points, distance_upper_bound=1.0)
        scales = np.minimum(scales, np.maximum(distance, extent[group].min()))
    return scales
