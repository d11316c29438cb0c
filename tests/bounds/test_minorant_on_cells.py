"""The minorant on single triangles: below the form, exact where it can be, every entry as exact as its bound says."""

from math import factorial
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.linalg import eigh
from small_meshes import nowhere, random_triangles

from service.bounds import minorant
from service.bounds.minorant import Minorant
from service.bounds.proof import reaches
from service.elements import moments
from service.elements.jet import simplex_polynomials
from service.elements.moments import moment_reference
from service.elements.quadrature import simplex_rule
from service.elements.reference import raw_orthonormal, scalar_norms
from service.elements.scalar import barycentric, subsimplices
from service.forms.form import Form, constant_form
from service.meshing.mesh import Mesh

Array = NDArray[np.float64]

ORDERS = (1, 2, 3, 4)

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
        poincare = float(minorant.poincare_constants(free)[0])
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


def composed(form: Form, order: int) -> tuple[Any, ...]:
    """What the code composes the minorant from: stiffness, flux, lifts, trace, shares, potentials."""
    seen: list[tuple[Any, ...]] = []
    plain = minorant.compose

    def remember(*arguments: Any, **options: Any) -> Array:
        seen.append(arguments)
        return plain(*arguments, **options)

    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(minorant, "compose", remember)
        Minorant(form, order).local()
    return seen[0]


@pytest.mark.parametrize("isotropic", [True, False])
def test_the_energy_of_the_error_is_spent_once(isotropic: bool) -> None:
    """int G grad e . grad e >= a |e|^2 / c^2 + b w sum_F mean_F e^2 for every e of zero mean, as the proof says.

    Tested on polynomials of degree 9; the linear ones on thin triangles come near.
    """
    tensors = moment_reference(2, 8)
    random = np.random.default_rng(0)
    spent = 0.0
    for mesh in random_triangles(100, 21):
        rotation = np.linalg.qr(random.standard_normal((2, 2)))[0]
        diffusion = np.eye(2) if isotropic else rotation * 10.0 ** random.uniform(-2, 2, 2) @ rotation.T
        free = form_of(mesh, diffusion, 0.0)
        poincare = float(minorant.poincare_constants(free)[0])
        for need in (0.0, 0.6, 0.84):
            form = form_of(mesh, diffusion, -need / poincare**2)
            shares = composed(form, 1)[4]
            energy = np.einsum("ab,abij->ij", form.gradient_metric[0, 0], tensors.stiffness[0])[1:, 1:]
            trace = tensors.trace[:, :, 1:].reshape(-1, len(energy))
            weights = np.repeat(shares.jump[0], len(trace) // 3)
            price = shares.cell[0] * np.eye(len(energy)) + trace.T @ (weights[:, None] * trace)
            spent = max(spent, float(eigh(price, energy, eigvals_only=True)[-1]))
            # What is left of negative potentials is paid by the cell's share.
            assert need * form.jacobian[0] / poincare**2 <= shares.cell[0]
    assert 0.6 <= spent <= 1


def wide_tensors(order: int, degree: int) -> moments.MomentReference:
    """The reference tensors before their last rounding: the same code with the cast to doubles left out."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(moments, "float", np.longdouble, raising=False)
        found = moment_reference.__wrapped__(2, order, degree)
    assert found.stiffness.dtype == np.longdouble
    return found


def wide_local(form: Form, order: int) -> NDArray[np.longdouble]:
    """N on each cell for the very lifts and shares that the code chose, all else in long doubles."""
    _, flux, lifts, _, shares, _ = composed(form, order)
    exact = wide_tensors(order, form.degree)
    metric = form.gradient_metric.astype(np.longdouble)
    stiffness = np.einsum("cmab,mabij->cij", metric, exact.stiffness[: metric.shape[1]])
    normal = exact.normals @ metric
    across = np.einsum("cmfa,mfajl->cfjl", normal, exact.slopes[: metric.shape[1]]).reshape(flux.shape)
    trace = exact.trace.reshape(-1, stiffness.shape[1])
    potential = form.potential[:, 0].astype(np.longdouble) * form.jacobian
    inner = potential[:, None, None] * np.eye(stiffness.shape[1])
    outer = np.zeros((len(inner), trace.shape[0], trace.shape[0]), dtype=np.longdouble)
    return np.asarray(minorant.compose(stiffness, across, lifts.astype(np.longdouble), trace, shares, (inner, outer)))


@pytest.mark.parametrize("order", [*ORDERS, 6])
def test_every_entry_is_as_exact_as_its_bound_says(order: int) -> None:
    """Against long doubles (64 bits), on triangles down to a thousandth as high as long, with any diffusion."""
    random = np.random.default_rng(order)
    used = 0.0
    for mesh in random_triangles(40, 7 * order):
        rotation = np.linalg.qr(random.standard_normal((2, 2)))[0]
        diffusion = rotation * 10.0 ** random.uniform(-2, 2, 2) @ rotation.T
        free = form_of(mesh, diffusion, 0.0)
        poincare = float(minorant.poincare_constants(free)[0])
        form = form_of(mesh, diffusion, float(random.uniform(-0.8, 0.8)) / poincare**2)
        local, bound = Minorant(form, order).local()
        wide = wide_local(form, order)
        error = np.abs(local - (wide + wide.swapaxes(1, 2)) / 2)
        assert np.all(error <= bound)
        used = max(used, float(np.max(error / bound)))
    # The bound is not a wild guess either.
    assert used >= 1e-4
