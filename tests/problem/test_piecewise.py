"""Coefficients by region: which entry counts where regions overlap."""

import numpy as np
import pytest

from service.problem.operator import LAPLACIAN, Samples
from service.problem.piecewise import Piecewise

LAYERED = Piecewise((("bed", 1), ("bank", 2), (None, 3)))


@pytest.mark.parametrize(
    ("regions", "value"),
    [((), 3), (("other",), 3), (("bank",), 2), (("bank", "bed"), 1), (("other", "bed"), 1)],
)
def test_the_first_entry_whose_region_contains_the_place_counts(regions, value):
    assert LAYERED.within(regions) == value


def test_indices_agree_with_the_place_by_place_answer():
    names = ("other", "bank", "bed", "far")
    inside = np.array([[bool(code >> bit & 1) for bit in range(4)] for code in range(16)])
    expected = [LAYERED.within([name for name, has in zip(names, row, strict=True) if has]) for row in inside]
    assert [LAYERED.values[number] for number in LAYERED.indices(names, inside)] == expected
    assert set(expected) == {1, 2, 3}


def test_a_value_everywhere_needs_no_regions():
    same = Piecewise.everywhere(7)
    assert same.uniform
    assert not LAYERED.uniform
    assert same.indices((), np.zeros((3, 0), dtype=bool)).tolist() == [0, 0, 0]
    assert LAYERED.map(str).entries == (("bed", "1"), ("bank", "2"), (None, "3"))


def test_the_laplacian_is_the_operator_that_is_not_stated():
    assert [[entry.exact for entry in matrix] for matrix in LAPLACIAN.diffusion.values] == [[1, 0, 0, 1]]
    assert [value.exact for value in LAPLACIAN.reaction.values] == [0]
    assert (LAPLACIAN.velocity, LAPLACIAN.form) == (None, "convective")


def test_samples_are_compared_by_their_values():
    points, vectors = np.array([[0.0, 0.0], [1.0, 0.0], [0.0, 1.0]]), np.ones((3, 2))
    assert Samples(points, vectors) == Samples(points.copy(), vectors.copy())
    assert Samples(points, vectors) != Samples(points, 2 * vectors)
    assert Samples(points, vectors) != Samples(points + 1, vectors)
    assert Samples(points, vectors) != "samples"
