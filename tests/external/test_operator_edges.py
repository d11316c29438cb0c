"""Operators at the edge of what the methods expect: few directions, zero ratios, coefficients that vary much."""

import json
from itertools import pairwise
from typing import Any

import pytest
from operator_runs import ask_problem, intervals

JSON = dict[str, Any]

SQUARE: JSON = {"shape": {"rectangle": {"corner": [0, 0], "size": [1, 1]}}}
FREE: list[JSON] = []
BOTTOM: list[JSON] = [{"name": "bottom", "on": {"segment": [[0, 0], [1, 0]]}, "condition": "dirichlet"}]
HELD: list[JSON] = [{"name": "rim", "on": "remainder", "condition": "dirichlet"}]

FLOW: JSON = {
    "samples": {
        "points": [[0, 0], [1, 0], [1, 1], [0, 1], [0.4, 0.5]],
        "vectors": [[0.2, 0], [0.3, 0], [0.3, 0.1], [0.2, 0], [0.26, 0]],
    }
}

CASES: dict[str, tuple[JSON, tuple[str, ...]]] = {
    "a trace seen by few functions": (
        {
            "domain": {"shape": {"rectangle": {"corner": [0, 0], "size": [1, 0.25]}}},
            "boundary": [
                {"name": "side", "on": {"segment": [[1, 0], [1, 0.25]]}, "condition": "neumann"},
                {"name": "rest", "on": "remainder", "condition": "dirichlet"},
            ],
        },
        ("trace",),
    ),
    "nothing holds": ({"domain": SQUARE, "boundary": FREE, "operator": {"diffusion": 1}}, ("coercivity", "decay_rate")),
    "not symmetric, nothing holds": (
        {"domain": SQUARE, "boundary": FREE, "operator": {"diffusion": [[75, 60], [-47, 80]]}},
        ("coercivity", "decay_rate"),
    ),
    "a norm that varies": (
        {
            "domain": {"shape": {"rectangle": {"corner": [0, 0], "size": [2, 1]}}},
            "boundary": HELD,
            "operator": {"diffusion": "1+0.4*sin(2.73*x-0.97*y)"},
            "norm": {"kind": "diffusion"},
        },
        ("coercivity", "continuity", "inf_sup"),
    ),
    "regions, samples, exchange": (
        {
            "domain": {
                **SQUARE,
                "regions": [{"name": "left", "shape": {"rectangle": {"corner": [0, 0], "size": [0.4, 1]}}}],
            },
            "boundary": [
                *BOTTOM,
                {"name": "top", "on": {"segment": [[0, 1], [1, 1]]}, "condition": "robin", "exchange": 0.4},
            ],
            "operator": {
                "diffusion": [{"region": "left", "value": 6}, {"value": "1.5+0.3*x"}],
                "velocity": FLOW,
                "reaction": "0.2*exp(-x/2)",
            },
            "norm": {"kind": "diffusion"},
        },
        ("coercivity", "inf_sup", "continuity", "decay_rate"),
    ),
    "a flow that expands": (
        {
            "domain": SQUARE,
            "boundary": BOTTOM,
            "operator": {"diffusion": "1+0.4*sin(3*x-2*y)", "velocity": ["x", "y"]},
        },
        ("coercivity", "inf_sup", "continuity"),
    ),
}


@pytest.mark.parametrize("name", CASES)
def test_every_constant_is_enclosed_and_only_narrows(name: str) -> None:
    """Partial results are nested, which ``ask_problem`` checks; alpha <= beta <= gamma (definition)."""
    problem, constants = CASES[name]
    result = ask_problem(json.loads(json.dumps(problem)), constants, 0.05, 5.0).result
    found = {constant: interval for (constant, _), interval in intervals(result).items()}
    assert set(found) == set(constants)
    assert all(lower <= upper for lower, upper in found.values())
    ordered = [found[constant] for constant in ("coercivity", "inf_sup", "continuity") if constant in found]
    for (lower, _), (_, upper) in pairwise(ordered):
        assert lower <= upper


@pytest.mark.parametrize("name", ["nothing holds", "not symmetric, nothing holds"])
def test_constants_have_no_energy(name: str) -> None:
    """Without reaction, flow and a held part coercivity and decay are zero: constants show it (elementary)."""
    problem, constants = CASES[name]
    for lower, upper in intervals(ask_problem(problem, constants, 0.05, 5.0).result).values():
        assert lower <= 0 <= upper <= 1e-20
