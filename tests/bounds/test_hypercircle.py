"""Dual norms of loads whose values are known: never below, and close; fluxes carry out what facets are given."""

import math

import numpy as np
import pytest
from numpy.typing import NDArray
from small_meshes import everywhere, square

from service.bounds.condensed import Condensed
from service.bounds.flux import FluxSpace
from service.bounds.hypercircle import Load, dual_norm
from service.bounds.ritz import TrialSpace
from service.elements.reference import scalar_norms
from service.forms.form import Form, Pencil, constant_form
from service.meshing.mesh import Mesh

Array = NDArray[np.float64]

ORDER = 4

FRIEDRICHS = 2 / math.pi
"""Of the unit square held on one side: 2 / pi (separation of variables); held all round it is smaller."""


def left(mesh: Mesh) -> NDArray[np.bool_]:
    """Facets on x = 0."""
    return np.asarray((mesh.part >= 0) & np.all(mesh.points[mesh.facets, 0] == 0, axis=1))


def right(mesh: Mesh) -> NDArray[np.bool_]:
    """Facets on x = 1."""
    return np.asarray((mesh.part >= 0) & np.all(mesh.points[mesh.facets, 0] == 1, axis=1))


def uniform(mesh: Mesh, form: Form, source: float, flux: float) -> Load:
    """f = source everywhere, g = flux on the right side."""
    moments = np.zeros((len(mesh.cells), 1))
    moments[:, 0] = source * form.jacobian * math.sqrt(0.5)
    facet = np.zeros((len(mesh.facets), ORDER + 1))
    facet[right(mesh), 0] = flux * form.facet_measure[right(mesh)] / scalar_norms(1, ORDER)[0]
    return Load(moments, facet, 1e-15 * np.abs(moments))


def response(norm: Form, load: Load) -> Array:
    """Moments of w0 w with (w, v) = L(v) on conforming functions of the same order."""
    trial = TrialSpace(Pencil(norm, norm), ORDER)
    cells = np.zeros((len(norm.mesh.cells), trial.weight.shape[1]))
    cells += load.source[:, :1] * trial.reference.moments[0]
    reference = trial.reference.facet_mass[0]
    vertices = np.zeros(trial.weight.shape[1])
    vertices[:3] = 1.0
    for face in range(3):
        given = load.facet[norm.mesh.cell_facets[:, face], 0]
        # Vertex functions add up to one: their row sums are the means of all functions over the facet.
        cells += given[:, None] * (reference[face] @ vertices)
    right_side = trial.numbering.collect(cells[:, :, None])
    w = trial.numbering.spread(Condensed.build(trial.weight, trial.numbering).solve(right_side))[:, :, 0]
    return np.asarray((w @ trial.reference.moments.T) * (norm.potential[:, 0] * norm.jacobian)[:, None])


def test_the_torsion_of_the_square() -> None:
    """f = 1, seminorm, held: |L|^2 = 0.03514425 (Saint-Venant's series, as listed among the project's check values)."""
    mesh = square(8)
    norm = constant_form(mesh, everywhere(mesh), diffusion=1.0)
    load = uniform(mesh, norm, 1.0, 0.0)
    load = Load(load.source, 0 * load.facet, load.source_error)
    found = dual_norm(norm, ORDER, load, np.zeros_like(load.source), FRIEDRICHS)
    assert math.sqrt(0.0351442537) <= found <= math.sqrt(0.03514425) * (1 + 1e-5)


@pytest.mark.parametrize("weight", [0.0, 1.0])
def test_a_flux_through_one_side(weight: float) -> None:
    """g = 1 on x = 1, held on x = 0: |L|^2 = 1 in the seminorm, tanh 1 in the norm h1 (elementary)."""
    mesh = square(4)
    norm = constant_form(mesh, left(mesh), diffusion=1.0, potential=weight)
    load = uniform(mesh, norm, 0.0, 1.0)
    moments = response(norm, load) if weight else np.zeros_like(load.source)
    found = dual_norm(norm, ORDER, load, moments, None if weight else FRIEDRICHS)
    exact = math.sqrt(math.tanh(1.0)) if weight else 1.0
    assert exact * (1 - 1e-12) <= found <= exact * (1 + 1e-6)


def test_facets_are_given_what_is_wanted() -> None:
    """Coefficients on both sides of a facet add up to those given, held sides excepted; divergences are met."""
    mesh = square(3)
    form = constant_form(mesh, left(mesh), diffusion=1.0)
    space = FluxSpace(form, 2)
    random = np.random.default_rng(0)
    wanted = random.standard_normal((len(mesh.facets), 3, 2))
    sources = random.standard_normal((len(mesh.cells), 6, 2))
    fields = space.equilibrate(sources, wanted)
    faces = fields[:, :9].reshape(len(mesh.cells), 3, 3, 2)
    total = np.zeros_like(wanted)
    np.add.at(total, mesh.cell_facets, faces)
    np.testing.assert_allclose(total[~left(mesh)], wanted[~left(mesh)], atol=1e-12)
    spread, _ = space.divergence_moments(fields)
    np.testing.assert_allclose(spread, sources, atol=1e-11)
