"""Red refinement of meshes."""

import numpy as np
import pytest
from meshing_shapes import SHAPES, check_mesh, perimeters

from service.meshing.generate import mesh_domain
from service.meshing.quality import flatness, longest_edges
from service.meshing.refine import refine


@pytest.mark.parametrize("name", ["square", "comb", "tiny hole", "segment held", "notch 359"])
def test_children_fit_together(name):
    mesh = mesh_domain(SHAPES[name], size=0.5, target=1e-5)
    fine = refine(mesh)
    check_mesh(fine, SHAPES[name])
    assert len(fine.cells) == 4 * len(mesh.cells)
    assert len(fine.points) == len(mesh.points) + len(mesh.facets)
    assert (fine.part >= 0).sum() == 2 * (mesh.part >= 0).sum()
    assert perimeters(fine) == pytest.approx(perimeters(mesh), rel=1e-14)
    assert (fine.unit, fine.origin, fine.shape_error) == (mesh.unit, mesh.origin, mesh.shape_error)


def test_children_are_similar_to_their_parent():
    mesh = mesh_domain(SHAPES["L-shape"], size=0.5, target=1e-6)
    fine = refine(mesh)
    assert np.array_equal(longest_edges(fine).reshape(-1, 4), np.repeat(longest_edges(mesh)[:, None] / 2, 4, 1))
    assert flatness(fine) == pytest.approx(np.repeat(flatness(mesh), 4))
