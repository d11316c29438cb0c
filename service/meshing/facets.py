"""Facets of a simplicial mesh in any dimension, found by sorting."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True)
class Facets:
    """The facets of a mesh.

    vertices : (nf, d) vertex numbers, rows ascending, sorted.
    cell_facets : (nc, d+1) facet opposite to vertex i of each cell.
    facet_cells : (nf, 2) the cells on both sides in ascending order, the second -1 on the boundary.
    """

    vertices: NDArray[np.int64]
    cell_facets: NDArray[np.int64]
    facet_cells: NDArray[np.int64]


def build_facets(cells: NDArray[np.int64]) -> Facets:
    """Number the facets of simplices given by (nc, d+1) vertex numbers, rows ascending.

    Raises ValueError when a facet belongs to more than two cells.
    """
    count, corners = cells.shape
    columns = [np.delete(np.arange(corners), i) for i in range(corners)]
    rows = np.stack([cells[:, kept] for kept in columns], axis=1).reshape(count * corners, corners - 1)
    order = sort_rows(rows)
    ordered = rows[order]
    new = np.concatenate([[True], (ordered[1:] != ordered[:-1]).any(axis=1)])
    if (~new[1:] & ~new[:-1]).any():
        raise ValueError("a facet belongs to more than two cells")
    number = np.cumsum(new) - 1
    cell_facets = np.empty(count * corners, dtype=np.int64)
    cell_facets[order] = number
    facet_cells = np.full((int(new.sum()), 2), -1, dtype=np.int64)
    facet_cells[number[new], 0] = order[new] // corners
    facet_cells[number[~new], 1] = order[~new] // corners
    return Facets(ordered[new], cell_facets.reshape(count, corners), facet_cells)


def sort_rows(rows: NDArray[np.int64]) -> NDArray[np.int64]:
    """Stable lexicographic order of (n, k) non-negative integers, as a permutation (n,)."""
    base = int(rows.max()) + 1
    if base ** rows.shape[1] < 2**63:
        key = rows[:, 0]
        for column in rows.T[1:]:
            key = key * base + column
        return np.argsort(key, kind="stable")
    return np.lexsort(rows.T[::-1])


def find_facets(facets: NDArray[np.int64], wanted: NDArray[np.int64]) -> NDArray[np.int64]:
    """Numbers of the facets with the given vertices.

    Parameters
    ----------
    facets : (nf, d) vertex numbers, rows ascending, sorted and distinct.
    wanted : (k, d) vertex numbers, rows in any order.

    Raises ValueError when one does not exist.
    """
    rows = np.vstack([facets, np.sort(wanted, axis=1)])
    order = sort_rows(rows)
    ordered = rows[order]
    new = np.concatenate([[True], (ordered[1:] != ordered[:-1]).any(axis=1)])
    number = np.empty(len(rows), dtype=np.int64)
    number[order] = np.cumsum(new) - 1
    if int(new.sum()) != len(facets):
        raise ValueError("no such facet")
    return number[len(facets) :]
