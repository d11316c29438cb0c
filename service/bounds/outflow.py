"""Flows through facets whose sums over the facets of each cell are exact, in floating-point numbers.

In a cell of diameter 1e-14 the last digit of a flow of size one is a large divergence. Flows that are whole multiples
of one power of two add up exactly; what a cell lacks is passed on from cell to cell along a tree of cells, to the
outside where there is a way out.
"""

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_matrix, csr_matrix, identity
from scipy.sparse.csgraph import breadth_first_order
from scipy.sparse.linalg import spsolve_triangular

from service.meshing.mesh import Mesh

Array = NDArray[np.float64]

DIGITS = 48
"""Binary digits of the largest flow that are kept: sums of many stay below 2^53 units."""


def balance(mesh: Mesh, open_facets: NDArray[np.bool_], flows: Array, targets: Array) -> Array:
    """Flows (nf, m) near the given ones whose sums over each cell are ``targets`` (nc, m), up to one unit of rounding.

    Flows count as positive out of the first cell of a facet. Boundary facets that are not open keep theirs. Without
    open boundary facets one cell, of the largest, takes what is left.
    """
    unit = np.exp2(np.ceil(np.log2(np.max(np.abs(flows), axis=0, initial=1e-300))) - DIGITS)
    whole = np.rint(flows / unit)
    first, second = mesh.facet_cells.T
    cells = len(mesh.cells)
    inner = second >= 0
    passable = inner | open_facets
    lacking = np.rint(targets / unit)
    np.subtract.at(lacking, first, whole)
    np.add.at(lacking, second[inner], whole[inner])

    beyond = np.where(inner, second, cells)  # the outside is one more cell
    ways = np.flatnonzero(passable)
    graph = coo_matrix((np.ones(len(ways)), (first[ways], beyond[ways])), shape=(cells + 1, cells + 1)).tocsr()
    largest = int(np.argmax(mesh.jacobian))
    root = cells if np.any(open_facets & ~inner) else largest
    order, parent = breadth_first_order(graph, root, directed=False)
    child = order[1:]
    # The facet between a cell and its parent: any one of those that join them.
    keys = np.minimum(first, beyond) * (cells + 1) + np.maximum(first, beyond)
    sorting = ways[np.argsort(keys[ways], kind="stable")]
    wanted = np.minimum(child, parent[child]) * (cells + 1) + np.maximum(child, parent[child])
    facet = sorting[np.searchsorted(keys[sorting], wanted)]

    # Each cell sends on what it lacks and what its children do: exact, for all are whole numbers.
    rank = np.zeros(cells + 1, dtype=np.int64)
    rank[order] = np.arange(len(order))
    links = csr_matrix((np.ones(len(child)), (rank[parent[child]], rank[child])), shape=(len(order),) * 2)
    load = np.vstack([lacking, np.zeros((1, flows.shape[1]))])[order]
    passed = spsolve_triangular((identity(len(order)) - links).tocsr(), load, lower=False, unit_diagonal=True)
    sign = np.where(first[facet] == child, 1.0, -1.0)
    np.add.at(whole, facet, sign[:, None] * passed[rank[child]])
    return np.asarray(whole * unit)


def exact_total(terms: Array) -> tuple[Array, Array]:
    """Sums over axis 1 and a bound of their error: no more than a rounding of the sum where nothing was lost.

    D. E. Knuth, The Art of Computer Programming 2, section 4.2.2: the error of every addition is itself a number.
    """
    total = np.zeros_like(terms[:, 0])
    lost, size = total, total
    for term in np.moveaxis(terms, 1, 0):
        new = total + term
        back = new - total
        error = (total - (new - back)) + (term - back)
        total, lost, size = new, lost + error, size + np.abs(error)
    return total + lost, 2.0**-51 * (np.abs(total + lost) + terms.shape[1] * size)
