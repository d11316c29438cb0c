"""Continuity, inf-sup and what follows from them, through the process ``constants``."""

import math
from typing import Any

import numpy as np
import pytest
from skfem import Basis, ElementTriP1, MeshTri
from skfem.models.poisson import laplace
from skfem.models.poisson import mass as mass_form

from service.processes.registry import PROCESSES

JSON = dict[str, Any]

SQUARE: JSON = {"rectangle": {"corner": [0, 0], "size": [1, 1]}}
HELD = [{"name": "rim", "on": "remainder", "condition": "dirichlet"}]
INFLOW = [
    {"name": "inflow", "on": {"segment": [[0, 0], [0, 1]]}, "condition": "dirichlet"},
    {"name": "rest", "on": "remainder", "condition": "neumann"},
]
ALL = ["coercivity", "inf_sup", "continuity"]


def ask(constants: list[str], boundary: list[JSON], tolerance: float = 1e-3, **problem: Any) -> JSON:
    """The whole result."""
    process = PROCESSES["constants"]
    seconds = problem.pop("seconds", 20)
    domain = {"shape": problem.pop("shape", SQUARE), **problem.pop("domain", {})}
    inputs = {
        "problem": {"domain": domain, "boundary": boundary, **problem},
        "constants": constants,
        "tolerance": tolerance,
        "limits": {"seconds": seconds},
    }
    result = process.run(process.accept(inputs), lambda percent, message, partial: None)
    for name in constants:
        found = result["constants"][name]
        assert found["rigour"] == "guaranteed"
        assert found["lower"] <= found["upper"]
    return dict(result)


def encloses(found: JSON, value: float, width: float) -> bool:
    size = max(abs(found["lower"]), abs(found["upper"]))
    return bool(found["lower"] <= value <= found["upper"] and found["upper"] - found["lower"] <= width * size)


def test_blocks() -> None:
    """K = mu_i on blocks, seminorm: alpha = min mu_i, gamma = max mu_i (reduced-basis literature, from memory)."""
    constants = ask(
        ALL,
        HELD,
        domain={"regions": [{"name": "left", "shape": {"rectangle": {"corner": [0, 0], "size": [0.5, 1]}}}]},
        operator={"diffusion": [{"region": "left", "value": 0.3}, {"value": 7}]},
        norm={"kind": "seminorm"},
    )["constants"]
    assert encloses(constants["coercivity"], 0.3, 1e-10)
    assert encloses(constants["continuity"], 7.0, 1e-10)
    assert encloses(constants["inf_sup"], 0.3, 1e-10)


def test_a_negative_reaction() -> None:
    """int grad u . grad v - 30 u v, seminorm, held: 1 - 30/(2 pi^2) < 0, min |1 - 30/lambda_j|, sup |1 - 30/lambda_j|.

    lambda_j = (m^2 + n^2) pi^2 (separation of variables); inf-sup 0.392072898146, the supremum is 1.
    """
    result = ask(ALL, HELD, operator={"reaction": -30}, norm={"kind": "seminorm"})
    constants = result["constants"]
    assert encloses(constants["coercivity"], 1 - 30 / (2 * math.pi**2), 1e-3)
    assert constants["coercivity"]["upper"] < 0
    exact = min(abs(1 - 30 / ((m * m + n * n) * math.pi**2)) for m in range(1, 9) for n in range(1, 9))
    assert exact == pytest.approx(0.392072898146, abs=1e-12)
    assert encloses(constants["inf_sup"], exact, 1e-3)
    assert encloses(constants["continuity"], 1.0, 1e-10)
    stability = result["derived"]["stability"]
    assert stability["by"] == "inf_sup"
    assert stability["bound"] * constants["inf_sup"]["lower"] == pytest.approx(1)
    assert "quasi_optimality" not in result["derived"]


def test_the_function_that_shows_a_negative_coercivity() -> None:
    """Evaluated with an independent assembly (scikit-fem), the witness has the ratio that is stated, below zero."""
    found = ask(["coercivity"], HELD, operator={"reaction": -30}, norm={"kind": "seminorm"})["constants"]["coercivity"]
    assert found["conclusion"].startswith("a is not coercive")
    told = found["witness"]
    mesh = MeshTri(np.array(told["points"]).T, np.array(told["triangles"]).T)
    basis = Basis(mesh, ElementTriP1())
    values = np.array(told["values"])
    assert np.all(values[mesh.boundary_nodes()] == 0)
    energy, mass = values @ laplace.assemble(basis) @ values, values @ mass_form.assemble(basis) @ values
    assert (energy - 30 * mass) / energy == pytest.approx(told["ratio"], rel=1e-9)
    assert told["ratio"] < 0
    assert found["lower"] <= told["ratio"]
    assert ask(["coercivity"], HELD)["constants"]["coercivity"]["conclusion"].startswith("a is coercive")


def test_a_solenoidal_flow_in_the_seminorm() -> None:
    """Held all round, divergence-free b: inf-sup = K in any domain, whatever b (elementary)."""
    constants = ask(
        ["inf_sup"],
        HELD,
        shape={"polygon": {"outer": [[0, 0], [3, 0], [2.5, 2], [1, 0.7]]}},
        operator={"diffusion": 0.5, "velocity": {"stream_function": "9*sin(x)*cos(2*y)"}},
        norm={"kind": "seminorm"},
    )["constants"]
    assert encloses(constants["inf_sup"], 0.5, 1e-10)


@pytest.mark.parametrize(
    ("boundary", "conforming"),
    [(HELD, 0.197115), (INFLOW, 0.199221)],
    ids=["held", "inflow held"],
)
def test_a_small_diffusion(boundary: list[JSON], conforming: float) -> None:
    """K = 0.2, b = (1, 0), norm h1: near the values of conforming spaces that a prototype of the project found."""
    constants = ask(ALL, boundary, operator={"diffusion": 0.2, "velocity": [1, 0]})["constants"]
    assert constants["inf_sup"]["lower"] >= 0.19688
    assert constants["inf_sup"]["lower"] <= conforming + 1e-6
    assert constants["inf_sup"]["upper"] >= conforming - 1e-6
    assert constants["inf_sup"]["relative_width"] <= 1e-3
    # coercivity: 0.190356 and 0.180272 there.
    assert constants["coercivity"]["lower"] < constants["inf_sup"]["lower"]
    assert constants["inf_sup"]["upper"] <= constants["continuity"]["upper"]


@pytest.mark.parametrize("flow", [1.0, 3.0, 10.0])
def test_advection_dominates(flow: float) -> None:
    """What is proved of inf-sup is never less than what is proved of coercivity."""
    result = ask(
        ALL, INFLOW, 0.02, operator={"diffusion": 0.02, "velocity": [flow, flow / 3], "reaction": 0.1}, seconds=12
    )
    constants = result["constants"]
    assert constants["inf_sup"]["lower"] >= constants["coercivity"]["lower"]
    assert constants["inf_sup"]["upper"] <= 0.02 * (1 + 1e-9)
    assert constants["continuity"]["lower"] >= constants["inf_sup"]["upper"]
    if not constants["inf_sup"]["target_met"]:
        assert any("finer level" in warning for warning in result["warnings"])


def test_numbers_of_a_flow() -> None:
    """K = 0.5, |b| = 2, c = 3 on the unit square: |b| L/K, |c| L^2/K, |c| L/|b|, L^2 = 2; h = 2 K/|b| (definition)."""
    result = ask(ALL, HELD, operator={"diffusion": 0.5, "velocity": [0, 2], "reaction": 3}, length_unit="mm")
    derived = result["derived"]
    assert derived["peclet"]["domain"] == pytest.approx(4 * math.sqrt(2))
    assert derived["peclet"]["mesh_size_for_unit_mesh_peclet"] == pytest.approx(0.5)
    assert derived["peclet"]["mesh"] == pytest.approx(result["mesh"]["largest_edge"] * 2)
    assert derived["peclet"]["unit_of_mesh_size"] == "mm"
    assert derived["damkoehler"]["diffusive"] == pytest.approx(12)
    assert derived["damkoehler"]["advective"] == pytest.approx(1.5 * math.sqrt(2))
    constants = result["constants"]
    ratio = constants["continuity"]["upper"] / constants["coercivity"]["lower"]
    assert derived["quasi_optimality"]["bound"] == pytest.approx(ratio)
    assert derived["stability"]["unit"] == "s"


def test_a_symmetric_operator_is_quasi_optimal_by_the_root() -> None:
    """Galerkin for symmetric a: the root of gamma / alpha (common practice, no source)."""
    result = ask(ALL, HELD, operator={"diffusion": [[2, 0.5], [0.5, 1]], "reaction": 4})
    constants = result["constants"]
    ratio = constants["continuity"]["upper"] / constants["coercivity"]["lower"]
    assert result["derived"]["quasi_optimality"]["bound"] == pytest.approx(math.sqrt(ratio))
    assert constants["continuity"]["relative_width"] <= 1e-3
    # (lambda K-part + 4) / (lambda + 1) <= 4 where K <= 4: the supremum is not above it.
    assert constants["continuity"]["upper"] <= 4


GRID = [[x / 10, y / 10] for x in range(11) for y in range(11)]


def samples(flow: Any) -> JSON:
    return {"samples": {"points": GRID, "vectors": [list(flow(x, y)) for x, y in GRID]}}


def test_a_sampled_velocity_is_that_of_its_expression() -> None:
    """Linear fields are interpolated exactly: all constants agree with those of the stated expression (definition)."""
    sampled = ask(ALL, INFLOW, operator={"velocity": samples(lambda x, y: (0.5 * x, 0.25 - y / 4))})
    stated = ask(ALL, INFLOW, operator={"velocity": ["0.5*x", "0.25 - y/4"]})
    for name in ALL:
        one, other = sampled["constants"][name], stated["constants"][name]
        assert one["lower"] <= other["upper"]
        assert other["lower"] <= one["upper"]
    assert sampled["constants"]["coercivity"]["relative_width"] <= 1e-3
    (told,) = [warning for warning in sampled["warnings"] if warning.startswith("velocity")]
    assert "121 samples" in told
    assert "at most 0.25 1/s" in told


def test_divergence_of_a_sampled_velocity_counts() -> None:
    """Held all round, b = (a x, 0): a(u, u) = int |grad u|^2 - a/2 int u^2, so coercivity falls as the theory says.

    Norm h1: (lambda_1 - a/2) / (lambda_1 + 1), lambda_1 = 2 pi^2 (closed form).
    """
    first = 2 * math.pi**2
    for a in (0.0, 4.0):
        found = ask(["coercivity"], HELD, 1e-4, operator={"velocity": samples(lambda x, y, a=a: (a * x, 0))})
        assert encloses(found["constants"]["coercivity"], (first - a / 2) / (first + 1), 1e-4)
