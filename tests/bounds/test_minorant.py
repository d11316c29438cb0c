"""Counting bounds: never too high, however coarse the mesh; sharp where it is fine; rounding paid for."""

from math import factorial
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.linalg import eigh
from small_meshes import (
    everywhere,
    nowhere,
    random_square,
    random_triangles,
    square,
    square_ratios,
)

from service.bounds import counting
from service.bounds.counting import Minorant, count, proves, reaches
from service.bounds.separation import counted_bound, reachable, scale_of, separate
from service.elements import moments
from service.elements.jet import simplex_polynomials
from service.elements.moments import moment_reference
from service.elements.quadrature import simplex_rule
from service.elements.reference import raw_orthonormal, scalar_norms
from service.elements.scalar import barycentric, subsimplices
from service.forms.form import Form, Pencil, constant_form, laplace
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
        assert not proves(pencil.at(t), order, most, scale_of(pencil, t))


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


def test_meshes_are_refined_until_the_minorant_reaches() -> None:
    coarse = laplace(square(1), everywhere(square(1)))
    assert not reaches(coarse.at(200.0))
    fine = reachable(coarse, lambda mesh: laplace(mesh, everywhere(mesh)), refine, 200.0, 10_000)
    assert fine is not None
    assert reaches(fine.at(200.0))
    assert reachable(coarse, lambda mesh: laplace(mesh, everywhere(mesh)), refine, 200.0, 7) is None


# One cell: N[Pi u] <= Q[u] for polynomials u of higher degree than the minorant knows.

EXTRA = 4
"""Degrees of the functions u beyond those of the cell polynomials."""


def projections(order: int) -> tuple[Array, Array, Array]:
    """Orthonormal polynomials of degree order + 1 + EXTRA: stiffness tensors, u_F over u_T of each, mass."""
    high = order + 1 + EXTRA
    tensors = moment_reference(2, high - 1)
    count, own = (order + 2) * (order + 3) // 2, order + 1
    points, weights = simplex_rule(1, 2 * high + 2)
    weights = weights * factorial(1)
    chi = np.array([jet[0] for jet in simplex_polynomials(order, barycentric(points))])
    chi = chi / np.sqrt(chi**2 @ weights)[:, None]
    lam = np.vstack([1 - points.sum(axis=0), points])
    corners = np.hstack([np.zeros((2, 1)), np.eye(2)])
    norms = scalar_norms(2, high)
    traces = []
    for facet in subsimplices(2, 2):
        values = raw_orthonormal(2, high, corners[:, list(facet)] @ lam, norms)[:, 0]
        traces.append((chi[:own] * weights) @ values.T)
    inside = np.eye(count, tensors.stiffness.shape[-1])
    return tensors.stiffness[0], np.vstack([*traces, inside]), np.eye(tensors.stiffness.shape[-1])


def form_of(mesh: Mesh, diffusion: Array, potential: float) -> Form:
    return constant_form(mesh, nowhere(mesh), diffusion=diffusion, potential=potential)


def sizes(form: Form, stiffness: Array) -> Array:
    """Sums of the absolute values of all that enters an energy."""
    return np.asarray(np.einsum("ab,abij->ij", np.abs(form.gradient_metric[0, 0]), np.abs(stiffness)))


@pytest.mark.parametrize("order", ORDERS)
def test_the_minorant_is_one_on_every_triangle(order: int) -> None:
    """Q - N o Pi is positive semidefinite on polynomials of four degrees more, on random triangles and diffusions."""
    stiffness, project, identity = projections(order)
    random = np.random.default_rng(order)
    for mesh in random_triangles(60, order):
        rotation = np.linalg.qr(random.standard_normal((2, 2)))[0]
        diffusion = rotation * 10.0 ** random.uniform(-1, 1, 2) @ rotation.T
        free = form_of(mesh, diffusion, 0.0)
        poincare = float(counting.poincare_constants(free)[0])
        for need in (-3.0, 0.0, 0.4, 0.84):
            form = form_of(mesh, diffusion, -need / poincare**2)
            local, bound = (part[0] for part in Minorant(form, order).local())
            below = project.T @ local @ project
            energy = np.einsum("ab,abij->ij", form.gradient_metric[0, 0], stiffness)
            exact = energy + form.potential[0, 0] * form.jacobian[0] * identity
            root = 1 / np.sqrt(np.diag(energy) + abs(form.jacobian[0]) / poincare**2)
            least = np.linalg.eigvalsh((exact - below) * root[:, None] * root)[0]
            rounded = np.abs(project.T) @ bound @ np.abs(project) + 1e-14 * sizes(form, stiffness)
            slack = np.linalg.norm(rounded * root[:, None] * root)
            assert slack <= 1e-3
            assert least >= -slack


@pytest.mark.parametrize("order", ORDERS)
def test_the_minorant_is_exact_on_its_own_polynomials(order: int) -> None:
    """N[Pi u] = Q[u] for u of degree order + 1: nothing is given away."""
    stiffness, project, identity = projections(order)
    own = (order + 2) * (order + 3) // 2
    for mesh in random_triangles(20, 50 + order):
        form = form_of(mesh, np.eye(2), -1.0)
        if not reaches(form):
            continue
        local = Minorant(form, order).local()[0][0]
        below = (project.T @ local @ project)[:own, :own]
        energy = np.einsum("ab,abij->ij", form.gradient_metric[0, 0], stiffness)
        exact = (energy + form.potential[0, 0] * form.jacobian[0] * identity)[:own, :own]
        np.testing.assert_allclose(below, exact, atol=1e-11 * np.abs(energy).max())


def wide_tensors(order: int, degree: int) -> moments.MomentReference:
    """The reference tensors before their last rounding: the same code with the cast to doubles left out."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(moments, "float", np.longdouble, raising=False)
        found = moment_reference.__wrapped__(2, order, degree)
    assert found.stiffness.dtype == np.longdouble
    return found


def wide_local(form: Form, order: int) -> NDArray[np.longdouble]:
    """N on each cell for the very lifts and shares that the code chose, all else in long doubles."""
    seen: list[tuple[Any, ...]] = []
    plain = counting.compose

    def remember(*arguments: Any, **options: Any) -> Array:
        seen.append(arguments)
        return plain(*arguments, **options)

    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(counting, "compose", remember)
        Minorant(form, order).local()
    _, flux, lifts, _, shares, _ = seen[0]
    exact = wide_tensors(order, form.degree)
    metric = form.gradient_metric.astype(np.longdouble)
    stiffness = np.einsum("cmab,mabij->cij", metric, exact.stiffness[: metric.shape[1]])
    normal = exact.normals @ metric
    across = np.einsum("cmfa,mfajl->cfjl", normal, exact.slopes[: metric.shape[1]]).reshape(flux.shape)
    trace = exact.trace.reshape(-1, stiffness.shape[1])
    potential = form.potential[:, 0].astype(np.longdouble) * form.jacobian
    inner = potential[:, None, None] * np.eye(stiffness.shape[1])
    outer = np.zeros((len(inner), trace.shape[0], trace.shape[0]), dtype=np.longdouble)
    return np.asarray(plain(stiffness, across, lifts.astype(np.longdouble), trace, shares, (inner, outer)))


@pytest.mark.parametrize("order", [*ORDERS, 6])
def test_every_entry_is_as_exact_as_its_bound_says(order: int) -> None:
    """Against long doubles (64 bits), on triangles down to a thousandth as high as long, with any diffusion."""
    random = np.random.default_rng(order)
    used = 0.0
    for mesh in random_triangles(40, 7 * order):
        rotation = np.linalg.qr(random.standard_normal((2, 2)))[0]
        diffusion = rotation * 10.0 ** random.uniform(-2, 2, 2) @ rotation.T
        free = form_of(mesh, diffusion, 0.0)
        poincare = float(counting.poincare_constants(free)[0])
        form = form_of(mesh, diffusion, float(random.uniform(-0.8, 0.8)) / poincare**2)
        local, bound = Minorant(form, order).local()
        wide = wide_local(form, order)
        error = np.abs(local - (wide + wide.swapaxes(1, 2)) / 2)
        assert np.all(error <= bound)
        used = max(used, float(np.max(error / bound)))
    # The bound is not a wild guess either.
    assert used >= 1e-4


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
