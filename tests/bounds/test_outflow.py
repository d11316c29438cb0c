"""Flows that add up exactly, checked in rational arithmetic."""

from fractions import Fraction

import numpy as np
import pytest
from small_meshes import random_square

from service.bounds.outflow import balance, exact_total


@pytest.mark.parametrize("is_open", [True, False])
def test_sums_over_cells_are_exact(is_open: bool) -> None:
    """Every cell's sum is its target to the unit of rounding, exactly zero where that is zero."""
    mesh = random_square(40, 3)
    random = np.random.default_rng(1)
    flows = random.standard_normal((len(mesh.facets), 2)) * 10.0 ** random.uniform(-9, 0, (len(mesh.facets), 1))
    boundary = mesh.facet_cells[:, 1] < 0
    flows[boundary] = 0.0 if not is_open else flows[boundary]
    sign = np.where(mesh.facet_cells[mesh.cell_facets, 0] == np.arange(len(mesh.cells))[:, None], 1, -1)
    targets = np.einsum("cf,cfm->cm", sign, flows[mesh.cell_facets])
    targets[:7] = 0.0
    if not is_open:
        targets[-1] -= targets.sum(axis=0)
    # Perturbed, as rounding leaves them.
    result = balance(mesh, boundary if is_open else np.zeros_like(boundary), flows * (1 + 1e-13), targets)
    unit = Fraction(2) ** -46
    misses = []
    for cell in range(len(mesh.cells)):
        total = sum(int(sign[cell, f]) * Fraction(float(result[mesh.cell_facets[cell, f], 0])) for f in range(3))
        misses.append(abs(total - Fraction(float(targets[cell, 0]))))
        if cell < 7 and is_open:
            assert total == 0
    # Without a way out one cell takes what the others' targets leave over.
    assert sorted(misses)[-1 if is_open else -2] <= unit
    assert sorted(misses)[-1] <= len(misses) * unit
    moved = np.max(np.abs(targets - np.einsum("cf,cfm->cm", sign, flows[mesh.cell_facets]))[:7])
    assert np.max(np.abs(result - flows)) <= 8 * moved + 1e-9


def test_totals_and_their_errors() -> None:
    """Sums of numbers of very different sizes, within the bound; whole numbers exactly."""
    random = np.random.default_rng(0)
    terms = random.standard_normal((500, 4)) * 10.0 ** random.uniform(-20, 5, (500, 4))
    terms[:, 3] = -terms[:, :3].sum(axis=1)
    total, error = exact_total(terms)
    for row, value, bound in zip(terms, total, error, strict=True):
        assert abs(sum(Fraction(float(term)) for term in row) - Fraction(float(value))) <= Fraction(float(bound))
    whole = random.integers(-(2**48), 2**48, (100, 3)).astype(float)
    total, error = exact_total(whole)
    assert np.all(total == whole.sum(axis=1))
    assert np.all(error <= 2.0**-50 * np.abs(total))
