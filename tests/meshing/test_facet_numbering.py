"""Facets in two and three dimensions."""

import time

import numpy as np
import pytest
from skfem import MeshTet, MeshTri

from service.meshing.facets import build_facets, find_facets, sort_rows


def sorted_cells(mesh) -> np.ndarray:
    return np.sort(mesh.t.T.astype(np.int64), axis=1)


@pytest.mark.parametrize("mesh", [MeshTri().refined(3), MeshTet().refined(2)])
def test_facets_agree_with_another_library(mesh):
    cells = sorted_cells(mesh)
    facets = build_facets(cells)
    theirs = {tuple(sorted(column)) for column in mesh.facets.T.tolist()}
    assert {tuple(row) for row in facets.vertices.tolist()} == theirs
    assert len(facets.vertices) == len(theirs)
    assert (facets.facet_cells[:, 1] < 0).sum() == len(mesh.boundary_facets())
    for corner in range(cells.shape[1]):
        opposite = np.delete(cells, corner, axis=1)
        assert np.array_equal(facets.vertices[facets.cell_facets[:, corner]], opposite)
    for cell_of_facet in facets.facet_cells.T:
        inside = np.flatnonzero(cell_of_facet >= 0)
        assert (facets.cell_facets[cell_of_facet[inside]] == inside[:, None]).any(axis=1).all()


def test_a_facet_of_three_cells_is_refused():
    with pytest.raises(ValueError, match="more than two cells"):
        build_facets(np.array([[0, 1, 2], [0, 1, 3], [0, 1, 4]]))


def test_finding_facets():
    facets = build_facets(sorted_cells(MeshTri().refined(2))).vertices
    wanted = facets[[7, 3, 11]][:, ::-1]
    assert find_facets(facets, wanted).tolist() == [7, 3, 11]
    with pytest.raises(ValueError, match="no such facet"):
        find_facets(facets, np.array([[0, 0]]))


def test_rows_too_large_for_one_key_are_sorted_too():
    rows = np.random.default_rng(0).integers(0, 4, size=(200, 3)) * 2**40
    order = sort_rows(rows)
    assert rows[order].tolist() == sorted(rows.tolist())
    assert np.array_equal(order, sort_rows(rows // 2**40))


def test_a_hundred_thousand_cells_are_quick():
    side = 225
    corner = np.arange(side * side).reshape(side, side)[:-1, :-1].ravel()
    lower = np.stack([corner, corner + 1, corner + side + 1], axis=1)
    upper = np.stack([corner, corner + side, corner + side + 1], axis=1)
    cells = np.vstack([lower, upper])
    assert len(cells) > 100_000
    begun = time.process_time()
    facets = build_facets(cells)
    assert time.process_time() - begun < 1.0
    assert len(facets.vertices) == len(cells) + side * side - 1
