"""What cannot be meshed is refused with advice, and leaves nothing behind."""

import gmsh
import numpy as np
import pytest
from meshing_shapes import SQUARE, domain, shoreline, square_hole

from service.errors import ComputationError
from service.meshing import fill as fill_module
from service.meshing.fill import fill
from service.meshing.generate import mesh_domain
from service.meshing.sizing import size_function


def failure(shape, **options) -> ComputationError:
    with pytest.raises(ComputationError) as caught:
        mesh_domain(shape, **({"size": 0.3, "target": 1e-3} | options))
    assert not gmsh.isInitialized()
    return caught.value


def test_two_pieces():
    shape = domain(SQUARE, np.array(SQUARE) + 2, components=2)
    assert failure(shape).kind == "domain-not-connected"


def test_too_many_vertices():
    error = failure(domain(shoreline(500)), max_cells=400)
    assert error.kind == "mesh-too-large"
    assert "400" in error.detail


def test_too_small_a_size_is_refused_before_meshing(monkeypatch):
    monkeypatch.setattr(fill_module, "_session", None)
    assert failure(domain(SQUARE), size=1e-4).kind == "mesh-too-large"


def test_too_many_layers():
    shape = domain(shoreline(60))
    plain = len(mesh_domain(shape, size=0.3, target=1e3).cells)
    graded = len(mesh_domain(shape, size=0.3, target=1e-9).cells)
    assert graded > plain
    assert failure(shape, target=1e-9, max_cells=(plain + graded) // 2).kind == "mesh-too-large"
    assert len(mesh_domain(shape, size=0.3, target=1e-9, max_cells=graded).cells) == graded


@pytest.mark.parametrize(
    "shape",
    [
        domain(SQUARE, square_hole(0.0, 0.0, 0.5)),
        domain(SQUARE, [(0, 0.5), (0.3, 0.6), (0.3, 0.4)]),
        domain([(0, 0), (2, 0), (2, 1), (1, 0.5), (2, 2), (0, 2), (1, 0.5), (0, 1)]),
        domain(SQUARE, square_hole(0.0, 0.2, 0.3)),
        domain(SQUARE, square_hole(1e-15, 0.2, 0.3)),
        domain([(0, 0), (1, 0), (1, 1), (0.5, 0), (0, 1)]),
    ],
)
def test_outlines_that_touch_themselves_never_reach_the_generator(shape, monkeypatch):
    monkeypatch.setattr(fill_module, "_session", None)
    error = failure(shape)
    assert error.kind == "meshing-failed"
    assert "touches itself" in error.detail


def test_detail_below_double_precision():
    """A strip whose width is some thousand units in the last place of its coordinates."""
    shape = domain(np.array([(1, 1), (2, 1), (2, 1 + 1e-12), (1, 1 + 1e-12)]) @ [[0.8, 0.6], [-0.6, 0.8]])
    error = failure(shape)
    assert error.kind == "meshing-failed"
    assert "double precision" in error.detail


def test_loops_must_close():
    shape = domain(SQUARE)
    shape.edges[3, 1] = 1
    with pytest.raises(ValueError, match="start one edge and end one"):
        mesh_domain(shape, size=0.3, target=1e-3)


def test_generator_errors_become_ours():
    points = np.array(SQUARE, dtype=np.float64)
    sizes = size_function(points, np.full(4, 0.5), 0.5)
    open_ring = np.array([[0, 1], [1, 2], [2, 3]])
    with pytest.raises(ComputationError) as caught:
        fill(points, open_ring, np.zeros(3, dtype=np.int64), sizes)
    assert caught.value.kind == "meshing-failed"
    assert not gmsh.isInitialized()


def test_wrong_orientation_is_noticed():
    assert failure(domain(SQUARE[::-1])).kind == "meshing-failed"
