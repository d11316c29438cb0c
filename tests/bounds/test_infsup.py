"""Certificates of inf-sup and responses, against dense singular values and closed forms."""

from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.linalg import svdvals

from service.bounds.condensed import assemble
from service.bounds.infsup import CONFORMING, InfSup
from service.bounds.pairing import PairingSpace
from service.bounds.pointwise import doubt, facet_size, oscillation, smallest_ratio, strongest
from service.bounds.response import response_bound
from service.bounds.ritz import TrialSpace
from service.constants.registry import CONSTANTS
from service.constants.structure import proportion
from service.elements import scalar
from service.elements.jet import simplex_polynomials
from service.forms.bilinear import bilinear
from service.forms.form import Pencil, constant_form
from service.forms.operator import Discrete
from service.meshing.generate import mesh_domain
from service.problem.request import Request, read_request

Array = NDArray[np.float64]

SQUARE = {"rectangle": {"corner": [0, 0], "size": [1, 1]}}
HELD: list[dict[str, Any]] = [{"name": "rim", "on": "remainder", "condition": "dirichlet"}]
INFLOW: list[dict[str, Any]] = [
    {"name": "in", "on": {"segment": [[0, 0], [0, 1]]}, "condition": "dirichlet"},
    {"name": "rest", "on": "remainder", "condition": "neumann"},
]
LEAKY: list[dict[str, Any]] = [{"name": "rim", "on": "remainder", "condition": "robin", "exchange": "1 + x"}]

CASES: dict[str, dict[str, Any]] = {
    "constant": {"boundary": HELD, "operator": {"diffusion": 0.2, "velocity": [1, 0]}},
    "outflow": {"boundary": INFLOW, "operator": {"diffusion": 0.2, "velocity": [1, 0.5]}},
    "turning": {
        "boundary": LEAKY,
        "operator": {"diffusion": 0.5, "velocity": ["1 - 2*y", "2*x - 1"], "reaction": "x*y"},
    },
    "diverging": {
        "boundary": INFLOW,
        "operator": {"diffusion": 0.4, "velocity": ["x^2", "y"], "reaction": 1, "form": "conservative"},
    },
    "indefinite": {"boundary": HELD, "operator": {"reaction": -30}, "norm": {"kind": "seminorm"}},
    "smooth": {"boundary": HELD, "operator": {"diffusion": 0.3, "velocity": ["sin(3*y)", "cos(2*x)"]}},
}


def request_of(case: dict[str, Any]) -> Request:
    return read_request({"problem": {"domain": {"shape": SQUARE}, **case}}, CONSTANTS)


def parts(name: str, size: float) -> tuple[InfSup, PairingSpace, float | None]:
    """The certificate, a space of conforming functions, and Friedrichs' constant where it is needed."""
    request = request_of(CASES[name])
    discrete = Discrete(request, mesh_domain(request.domain, size=size, target=1e-4))
    form, norm = bilinear(discrete), discrete.norm
    # Unit square held all round: 1 / (pi sqrt 2), closed form.
    friedrichs = None if request.norm.kind == "h1" else 0.2250791
    theta = proportion(request)
    assert theta is not None
    case = InfSup(discrete.symmetric_part, norm, form, theta, doubt(form, norm, friedrichs))
    return case, PairingSpace(form, TrialSpace(Pencil(norm, norm), 4)), friedrichs


def singular_values(space: PairingSpace) -> Array:
    """Of the form on the conforming functions, in the norm: by dense linear algebra."""
    numbering = space.trial.numbering
    matrix = assemble(space.matrix, numbering.every, numbering.size).toarray()
    gram = assemble(space.trial.weight, numbering.every, numbering.size).toarray()
    half = np.linalg.inv(np.linalg.cholesky(gram))
    return np.asarray(svdvals(half @ matrix @ half.T))


@pytest.mark.parametrize("name", CASES)
def test_certificates_lie_below_and_responses_above(name: str) -> None:
    """beta between both; the value of conforming spaces of order 4 lies there too, and both come near it."""
    case, space, friedrichs = parts(name, 0.12)
    dense = float(singular_values(space)[-1])
    above = response_bound(case, 4, friedrichs)
    assert dense <= above * (1 + 1e-4)
    assert above <= 1.01 * dense
    assert case.proves((0.97 * dense) ** 2)
    assert not case.proves((above * (1 + 1e-9)) ** 2)


def test_nothing_above_the_closed_form_is_proved() -> None:
    """int grad u . grad v - 30 u v, seminorm, unit square held: beta = min |1 - 30 / lambda_j| = 0.392072898146.

    Closed form, as listed among the project's check values.
    """
    case, _, friedrichs = parts("indefinite", 0.12)
    for factor in (1 + 1e-6, 1.001, 1.1, 2.0):
        assert not case.proves((factor * 0.392072898146) ** 2)
    assert case.proves((0.999 * 0.392072898146) ** 2)
    assert 0.392072898146 <= response_bound(case, 6, friedrichs) <= 0.39208


@pytest.mark.parametrize("name", CASES)
def test_moments_give_the_form_exactly(name: str) -> None:
    """g from cell and facet moments of a polynomial u is k(u, phi), as assembled from u itself."""
    case, _, _ = parts(name, 0.5)
    order = case.order
    trial = TrialSpace(Pencil(case.norm, case.norm), min(order + 1, 5))
    random = np.random.default_rng(0)
    u = trial.numbering.spread(random.standard_normal((trial.numbering.size, 1)))[:, :, 0]
    cell = u @ trial.reference.moments.T
    facet = facet_moments(case, trial, u)
    count = (order + 2) * (order + 3) // 2
    padded = np.zeros((len(u), count))
    padded[:, : min(count, cell.shape[1])] = cell[:, :count]
    found = np.einsum("cij,cj->ci", case.coupling(), np.concatenate([facet, padded], axis=1))
    collected = case.trial.numbering.collect(found[:, :, None])[:, 0]
    # k(u, phi) with phi in the richer space: its matrix is that of a less theta times the norm's.
    pairing = PairingSpace(case.form, trial)
    whole = np.einsum("cij,cj->ci", pairing.matrix - case.theta * trial.weight, u)
    assembled = trial.numbering.collect(whole[:, :, None])[:, 0]
    for probe in range(5):
        small = np.random.default_rng(probe + 1).standard_normal((case.trial.numbering.size, 1))
        # Bubbles of different orders are different functions: only shared ones are carried over.
        small[case.trial.numbering.shared :] = 0.0
        function = case.trial.numbering.spread(small)
        large = trial.numbering.restrict(trial.extend(function, CONFORMING))[:, 0]
        size = np.abs(assembled) @ np.abs(large)
        assert collected @ small[:, 0] == pytest.approx(assembled @ large, abs=1e-10 * size)


def facet_moments(case: InfSup, trial: TrialSpace, u: Array) -> Array:
    """Moments of u on the facets of each cell, by a Gauss rule of its own; bubbles vanish there."""
    nodes, weights = np.polynomial.legendre.leggauss(12)
    points, weights = ((nodes + 1) / 2)[None], weights / 2
    chi = np.array([jet[0] for jet in simplex_polynomials(case.order, scalar.barycentric(points))])
    chi = chi / np.sqrt(chi**2 @ weights)[:, None]
    lam, corners = np.vstack([1 - points[0], points[0]]), np.array([[0.0, 1.0, 0.0], [0.0, 0.0, 1.0]])
    faces = []
    for facet in scalar.subsimplices(2, 2):
        values = np.array(scalar.basis(2, trial.order, corners[:, list(facet)] @ lam))[:, 0]
        skeleton = trial.reference.skeleton
        faces.append(u[:, :skeleton] @ values[:skeleton] @ (chi * weights).T)
    return np.concatenate(faces, axis=1)


@pytest.mark.parametrize("name", CASES)
def test_pointwise_bounds_hold_for_all_functions(name: str) -> None:
    """Plain and skew bounds with the facet terms' share lie above the largest singular value; oscillation below it."""
    request = request_of(CASES[name])
    case, space, friedrichs = parts(name, 0.2)
    values = singular_values(space)
    discrete = Discrete(request, case.form.mesh)
    for skew in (False, True):
        form = bilinear(discrete, skew)
        edge = space.trial
        mass = edge.local(constant_form(case.form.mesh, form.dirichlet, facet=facet_size(form)))
        numbering = edge.numbering
        gram = assemble(edge.weight, numbering.every, numbering.size).toarray()
        half = np.linalg.inv(np.linalg.cholesky(gram))
        trace = np.linalg.norm(half @ assemble(mass, numbering.every, numbering.size).toarray() @ half.T, 2)
        assert values[0] <= strongest(form, case.norm, skew, friedrichs) + trace * 1.001
    assert oscillation(case.energy, case.norm) <= case.theta * (1 + 1e-9)
    assert smallest_ratio(case.energy, case.norm) >= case.theta * (1 - 1e-9)
