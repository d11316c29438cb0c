"""Counting bounds: never too high, however coarse the mesh; sharp where it is fine; rounding paid for."""

from dataclasses import replace

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.linalg import eigh
from small_meshes import (
    everywhere,
    nowhere,
    random_square,
    square,
    square_ratios,
)

from service.bounds import proof, separation
from service.bounds.minorant import Minorant
from service.bounds.proof import Prover, count, reaches
from service.bounds.separation import counted_bound, reachable, separate
from service.forms.form import Pencil, laplace
from service.meshing.mesh import Mesh
from service.meshing.refine import refine

Array = NDArray[np.float64]

ORDERS = (1, 2, 3, 4)

HELD = {"held": (everywhere, True), "free": (nowhere, False)}


def square_pencil(mesh: Mesh, name: str) -> tuple[Pencil, Array]:
    dirichlet, held = HELD[name]
    return laplace(mesh, dirichlet(mesh)), square_ratios(60, held)


@pytest.mark.parametrize("order", ORDERS)
@pytest.mark.parametrize("name", HELD)
@pytest.mark.parametrize("seed", [0, 1])
def test_counts_are_never_too_small(seed: int, name: str, order: int) -> None:
    """N_t has at least as many negative eigenvalues as there are ratios below t."""
    pencil, exact = square_pencil(random_square(90, seed), name)
    told = 0
    for t in np.linspace(3.0, 90.0, 14):
        found = count(pencil.at(t), order)
        if found is not None:
            assert found >= np.sum(exact < t)
            told += 1
    assert told >= 7


@pytest.mark.parametrize("order", ORDERS)
@pytest.mark.parametrize("name", HELD)
def test_nothing_false_is_proved(name: str, order: int) -> None:
    """That at most k - 1 ratios lie below a t a hair above the k-th one."""
    pencil, exact = square_pencil(random_square(120, 5), name)
    for k in (1, 2, 3, 4, 5, 6):
        t = exact[k - 1] * (1 + 1e-9) + 1e-9
        most = int(np.sum(exact < t)) - 1
        assert not Prover(pencil, order, t).proves(t, most)


@pytest.mark.parametrize(("order", "gap"), [(1, 6e-2), (2, 3e-3), (3, 2e-4), (4, 1e-4)])
@pytest.mark.parametrize("name", HELD)
def test_bounds_are_below_the_closed_form_and_close(name: str, order: int, gap: float) -> None:
    """As close as the order allows on 128 cells; from order 4 on what is set aside for rounding decides."""
    pencil, exact = square_pencil(square(8), name)
    for k in (1, 2, 4) if name == "held" else (2, 3, 4):
        bound = counted_bound(pencil, exact[k - 1] * (1 + 1e-10), k, order, 1e-6)
        assert exact[k - 1] * (1 - gap) <= bound <= exact[k - 1]


@pytest.mark.parametrize("name", HELD)
@pytest.mark.parametrize("size", [1, 3, 4])
def test_cuts_are_proved_between_the_right_ratios(size: int, name: str) -> None:
    pencil, exact = square_pencil(square(8), name)
    cut = separate(pencil, exact[: size + 3] * (1 + 1e-8), size)
    assert cut.count == size
    assert exact[size - 1] < cut.rho <= exact[size]


def test_a_cut_inside_a_double_ratio_is_refused() -> None:
    """5 pi^2 is double: with wrong Ritz values that show a gap there, nothing is proved."""
    pencil, exact = square_pencil(square(8), "held")
    pretended = exact[:6].copy()
    pretended[2] *= 1.3
    cut = separate(pencil, pretended, 2)
    assert cut.count == 0 or cut.rho <= exact[2]


def test_counts_that_lie_do_not_make_bounds(monkeypatch: pytest.MonkeyPatch) -> None:
    """The unproved count only guides the search; what it finds is proved or given up."""
    pencil, exact = square_pencil(square(8), "held")
    monkeypatch.setattr(separation, "count", lambda form, order: 0)
    for k in (1, 2, 4):
        assert counted_bound(pencil, 1.05 * exact[k - 1], k, 2, 1e-3) <= exact[k - 1]


def test_a_factorisation_with_a_large_residual_proves_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    pencil, exact = square_pencil(square(4), "held")
    prover = Prover(pencil, 2, exact[0])
    assert prover.proves(0.9 * exact[0], 0)
    plain = proof.factorise
    monkeypatch.setattr(proof, "factorise", lambda matrix: replace(plain(matrix), residual=0.1))
    assert not prover.proves(0.9 * exact[0], 0)


def test_meshes_are_refined_until_the_minorant_reaches() -> None:
    coarse = laplace(square(1), everywhere(square(1)))
    assert not reaches(coarse.at(200.0))
    fine = reachable(coarse, lambda mesh: laplace(mesh, everywhere(mesh)), refine, 200.0, 10_000)
    assert fine is not None
    assert reaches(fine.at(200.0))
    assert reachable(coarse, lambda mesh: laplace(mesh, everywhere(mesh)), refine, 200.0, 7) is None


@pytest.mark.parametrize("order", [1, 3])
def test_the_condensed_matrix_is_as_exact_as_its_allowance_says(order: int) -> None:
    """Cell unknowns eliminated in long doubles, from the same local matrices and from ones wrong by their bounds."""
    mesh = random_square(30, 2)
    form = laplace(mesh, everywhere(mesh)).at(15.0)
    minorant = Minorant(form, order)
    found = minorant.condensed()
    assert found is not None
    matrix, allowance = found
    local, bound = minorant.local()
    random = np.random.default_rng(0)
    signs = random.choice([-1.0, 1.0], bound.shape)
    for side in (0.0, 1.0):
        wrong = bound * side * np.where(np.tril(np.ones(bound.shape[1:])), signs, signs.swapaxes(1, 2))
        dense = eliminated(local.astype(np.longdouble) + (wrong + wrong.swapaxes(1, 2)) / 2, minorant)
        error = np.linalg.norm((matrix.toarray() - dense).astype(float), 2)
        assert error <= allowance
    assert allowance <= 1e-9 * np.linalg.norm(matrix.toarray(), 2)


def eliminated(local: NDArray[np.longdouble], minorant: Minorant) -> NDArray[np.longdouble]:
    """The facet matrix: cell unknowns of each cell eliminated one after the other."""
    skeleton = minorant.numbering.skeleton
    facets = skeleton.shape[1]
    reduced = local.copy()
    for pivot in range(reduced.shape[1] - 1, facets - 1, -1):
        column = reduced[:, :, pivot] / reduced[:, pivot, pivot][:, None]
        reduced = reduced - column[:, :, None] * reduced[:, pivot][:, None, :]
        reduced = reduced[:, :pivot, :pivot]
    size = minorant.numbering.shared
    dense = np.zeros((size, size), dtype=np.longdouble)
    for cell, numbers in enumerate(skeleton):
        kept = np.flatnonzero(numbers >= 0)
        dense[np.ix_(numbers[kept], numbers[kept])] += reduced[cell][np.ix_(kept, kept)]
    return dense


def test_dense_eigenvalues_agree_with_the_count() -> None:
    """The count of the condensed matrix is that of the whole matrix, cell unknowns included (Haynsworth)."""
    mesh = random_square(20, 8)
    for t in (15.0, 30.0, 45.0):
        minorant = Minorant(laplace(mesh, everywhere(mesh)).at(t), 2)
        local = minorant.local()[0]
        skeleton, size = minorant.numbering.skeleton, minorant.numbering.size
        bubbles = minorant.numbering.bubbles
        whole = np.zeros((size, size))
        for cell, numbers in enumerate(skeleton):
            own = minorant.numbering.shared + bubbles * cell + np.arange(bubbles)
            every = np.concatenate([numbers, own])
            kept = np.flatnonzero(every >= 0)
            whole[np.ix_(every[kept], every[kept])] += local[cell][np.ix_(kept, kept)]
        found = count(minorant.form, 2)
        if found is not None:
            assert found == np.sum(eigh(whole, eigvals_only=True) < 0)
