"""Allowances for rounding against long doubles (64 bits): inner products, energies of fields, divergences, duals.

The metrics of cells are taken as computed (their own error is tested with the forms); all else is done over in more
digits.
"""

from fractions import Fraction

import numpy as np
import pytest
from numpy.typing import NDArray
from small_meshes import everywhere, nowhere, random_square, random_triangles

from service.bounds.flux import FluxSpace
from service.bounds.gram import Gram, gram
from service.bounds.lehmann import goerisch_gram
from service.bounds.ritz import TrialSpace
from service.elements.jet import simplex_dimension
from service.elements.reference import flux_tensors, flux_transform, scalar_tensors, scalar_transform
from service.forms.form import Pencil, constant_form, laplace
from service.meshing.mesh import Mesh

Array = NDArray[np.float64]
Wide = NDArray[np.longdouble]

ORDERS = (1, 2, 4, 7)


def wide_scalar(order: int) -> tuple[Wide, Wide, Wide]:
    """Mass, stiffness and moments of the very basis in use, not rounded to doubles."""
    mass, stiffness, _, moments = scalar_tensors(2, order, 0)
    skeleton = 3 * order
    change = scalar_transform(stiffness[0].astype(float), skeleton).astype(np.longdouble)
    assert mass.dtype == np.longdouble
    return change.T @ mass[0] @ change, change.T @ stiffness[0] @ change, moments @ change


def wide_flux(order: int) -> tuple[Wide, Wide]:
    """Mass and divergence of the very basis in use, not rounded to doubles."""
    mass, divergence = flux_tensors(2, order)
    facet = 3 * simplex_dimension(1, order)
    change = flux_transform(mass.astype(float), divergence.astype(float), facet)[0].astype(np.longdouble)
    assert mass.dtype == np.longdouble
    divergence = divergence @ change
    # Known exactly (Raviart-Thomas functions carry whole flows), finer than the rounding of wide numbers.
    assert np.allclose(divergence[0, [0, facet // 3, 2 * facet // 3]], np.sqrt(np.longdouble(2)), rtol=0, atol=1e-17)
    divergence[0] = 0
    divergence[0, : facet : facet // 3] = np.sqrt(np.longdouble(2))
    return change.T @ mass @ change, divergence


def check(found: Gram, exact: Wide) -> float:
    """Every entry within its bound; the largest share of a bound that is used up."""
    error = np.abs(found.matrix - exact)
    assert np.all(error <= found.error)
    return float(np.max(error / found.error))


def pencil_on(mesh: Mesh, seed: int) -> Pencil:
    """A random diffusion, a potential and a weight, on all cells the same."""
    random = np.random.default_rng(seed)
    rotation = np.linalg.qr(random.standard_normal((2, 2)))[0]
    diffusion = rotation * 10.0 ** random.uniform(-2, 2, 2) @ rotation.T
    energy = constant_form(mesh, nowhere(mesh), diffusion=diffusion, potential=float(random.uniform(0.1, 9)))
    return Pencil(energy, constant_form(mesh, nowhere(mesh), potential=float(random.uniform(0.1, 9))))


def meshes() -> list[Mesh]:
    return [random_square(25, 1), *random_triangles(12, 3)]


@pytest.mark.parametrize("order", ORDERS)
def test_inner_products_of_trial_functions(order: int) -> None:
    mass, stiffness, _ = wide_scalar(order)
    used = 0.0
    for seed, mesh in enumerate(meshes()):
        pencil = pencil_on(mesh, seed)
        trial = TrialSpace(pencil, order)
        random = np.random.default_rng(seed)
        functions = random.standard_normal((len(mesh.cells), len(mass), 3)) * 10.0 ** random.uniform(-3, 3, (1, 1, 3))
        # Large constants with little on top of them, too.
        functions[:, :3, 0] = 1e5 + functions[:, :3, 0]
        wide = functions.astype(np.longdouble)
        for form in (pencil.energy, pencil.weight):
            local = np.einsum("cab,abij->cij", form.gradient_metric[:, 0].astype(np.longdouble), stiffness)
            # Gradients do not see constants: taken off, long doubles lose nothing to cancellation.
            varying = wide.copy()
            varying[:, :3] -= wide[:, :1]
            exact = (varying.swapaxes(1, 2) @ local @ varying).sum(axis=0)
            volume = (form.potential[:, 0].astype(np.longdouble) * form.jacobian)[:, None, None]
            exact = exact + (volume * (wide.swapaxes(1, 2) @ mass @ wide)).sum(axis=0)
            used = max(used, check(trial.gram(form, functions), exact))
    assert used >= 1e-4


@pytest.mark.parametrize("order", ORDERS)
def test_energies_and_divergences_of_fields(order: int) -> None:
    mass, divergence = wide_flux(order)
    used = 0.0
    for seed, mesh in enumerate(meshes()):
        flux = FluxSpace(pencil_on(mesh, seed).energy, order)
        fields = np.random.default_rng(seed).standard_normal((len(mesh.cells), mass.shape[-1], 2))
        wide = fields.astype(np.longdouble)
        local = np.einsum("cab,abij->cij", flux.metric.astype(np.longdouble), mass)
        exact = (wide.swapaxes(1, 2) @ local @ wide).sum(axis=0)
        used = max(used, check(flux.energy_gram(fields), exact))
        spread, doubt = flux.divergence_moments(fields)
        assert np.all(np.abs(spread - divergence @ wide) <= doubt)
    assert used >= 1e-4


@pytest.mark.parametrize("order", [2, 4])
@pytest.mark.parametrize("shift", [0.5, 20.0])
def test_duals_of_trial_functions(order: int, shift: float) -> None:
    """<w_i, w_j> of the fields that were found, evaluated over in more digits; the flux part only grows."""
    mesh = random_square(25, 2)
    pencil = laplace(mesh, everywhere(mesh))
    shifted = pencil.shifted(shift)
    trial, flux = TrialSpace(shifted, order), FluxSpace(shifted.energy, order)
    ratios, functions = trial.smallest(0.0, 3, 1e-6)
    ratios, functions = ratios[:3], functions[:, :, :3]
    found = goerisch_gram(trial, flux, functions, ratios)

    _, _, moments = wide_scalar(order)
    mass, divergence = wide_flux(order)
    p, b, jacobian = shift, 1.0, flux.form.jacobian[:, None, None]
    # The same calls as in the code under test give the same fields to the bit.
    fields = flux.equilibrate(jacobian * (p / ratios - b) * (trial.reference.moments @ functions))
    wide = fields.astype(np.longdouble)
    residual = b * jacobian * (moments @ functions.astype(np.longdouble)) + divergence @ wide
    local = np.einsum("cab,abij->cij", flux.metric.astype(np.longdouble), mass)
    energy = (wide.swapaxes(1, 2) @ local @ wide).sum(axis=0)
    exact = energy + (residual.swapaxes(1, 2) @ (residual / (p * jacobian))).sum(axis=0)
    allowed = found.error + 5 * flux.form.metric_error * np.abs(energy)
    assert np.all(np.abs(found.matrix - exact) <= allowed)
    # As a form, what was found with its error is above the exact one.
    assert np.linalg.eigvalsh((found.matrix + found.slack - exact).astype(float))[0] >= 0


@pytest.mark.parametrize("order", [2, 4])
def test_duals_satisfy_what_defines_them(order: int) -> None:
    """<w, (grad v, v)> = B(u, v) for every v, so |w|^2 >= B(u, v)^2 / A(v); nearly equal for an eigenfunction u = v."""
    mesh = random_square(40, 4)
    pencil = laplace(mesh, everywhere(mesh)).shifted(3.0)
    trial = TrialSpace(pencil, order)
    ratios, functions = trial.smallest(0.0, 1, 1e-10)
    functions = functions[:, :, :1]
    dual = goerisch_gram(trial, FluxSpace(pencil.energy, order), functions, ratios[:1]).matrix[0, 0]
    mass, energy = (trial.gram(form, functions).matrix[0, 0] for form in (pencil.weight, pencil.energy))
    assert dual >= mass**2 / energy * (1 - 1e-12)
    assert dual == pytest.approx(mass**2 / energy, rel={2: 3e-2, 4: 1e-5}[order])


@pytest.mark.parametrize("seed", range(5))
def test_sums_over_cells_are_within_their_errors(seed: int) -> None:
    """Local matrices wrong by as much as the bounds allow; the exact sum in rational arithmetic."""
    random = np.random.default_rng(seed)
    functions, local = random.standard_normal((6, 4, 2)), random.standard_normal((6, 4, 4))
    local = local + local.swapaxes(1, 2)
    bounds, relative = np.abs(local) + 0.1, 1e-13
    signs = random.choice([-1, 1], local.shape)
    signs = np.triu(signs) + np.triu(signs, 1).swapaxes(1, 2)
    found = gram(functions, local, bounds, relative)
    for i in range(2):
        for j in range(2):
            total = Fraction(0)
            for cell, a, b in np.ndindex(6, 4, 4):
                entry = Fraction(float(local[cell, a, b]))
                entry += (
                    int(signs[cell, a, b]) * Fraction(9, 10) * Fraction(relative) * Fraction(float(bounds[cell, a, b]))
                )
                total += Fraction(float(functions[cell, a, i])) * entry * Fraction(float(functions[cell, b, j]))
            assert abs(Fraction(float(found.matrix[i, j])) - total) <= Fraction(float(found.error[i, j]))


def test_slack_is_above_every_matrix_within_the_errors() -> None:
    random = np.random.default_rng(0)
    for _ in range(200):
        error = np.abs(random.standard_normal((4, 4)))
        found = Gram(np.zeros((4, 4)), error + error.T)
        wrong = (error + error.T) * random.choice([-1.0, 1.0], (4, 4))
        wrong = np.triu(wrong) + np.triu(wrong, 1).T
        assert np.linalg.eigvalsh(found.slack - wrong)[0] >= 0
