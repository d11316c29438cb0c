"""Trace, coercivity and decay rate against closed forms, through the process ``constants``."""

import math
from typing import Any

import pytest

from service.processes.registry import PROCESSES

JSON = dict[str, Any]

SQUARE: JSON = {"rectangle": {"corner": [0, 0], "size": [1, 1]}}
HELD = [{"name": "rim", "on": "remainder", "condition": "dirichlet"}]
FREE = [{"name": "rim", "on": "remainder", "condition": "neumann"}]
CF2 = 1 / (2 * math.pi**2)
"""Squared Friedrichs constant of the unit square held all round (separation of variables)."""


def ask(constant: str, boundary: list[JSON], tolerance: float = 1e-5, shape: JSON = SQUARE, **problem: Any) -> JSON:
    process = PROCESSES["constants"]
    seconds = problem.pop("seconds", 30)
    inputs = {
        "problem": {"domain": {"shape": shape, **problem.pop("domain", {})}, "boundary": boundary, **problem},
        "constants": [constant],
        "tolerance": tolerance,
        "limits": {"seconds": seconds},
    }
    result = process.run(process.accept(inputs), lambda percent, message, partial: None)
    found: JSON = result["constants"][constant]
    return found


def assert_encloses(found: JSON, value: float, width: float) -> None:
    assert found["lower"] <= value <= found["upper"]
    assert found["upper"] - found["lower"] <= width * max(abs(found["lower"]), abs(found["upper"]))
    assert found["rigour"] == "guaranteed"


def test_trace_constant_of_the_square() -> None:
    """tau = (1/sqrt 2) tanh(1/(2 sqrt 2)): the eigenfunction is a product of hyperbolic cosines (closed form)."""
    tau = math.tanh(1 / (2 * math.sqrt(2))) / math.sqrt(2)
    found = ask("trace", FREE)["rim"]
    assert_encloses(found, tau**-0.5, 1e-5)
    assert found["unit"] == "m^(-1/2)"


def test_trace_constant_of_a_layered_strip() -> None:
    """Held at the bottom, gradient weighted by K, trace on the top: C^2 = H1/K1 + H2/K2 (elementary)."""
    found = ask(
        "trace",
        [
            {"name": "bottom", "on": {"segment": [[0, 0], [2, 0]]}, "condition": "dirichlet"},
            {"name": "top", "on": {"segment": [[0, 1], [2, 1]]}, "condition": "neumann"},
            {"name": "sides", "on": "remainder", "condition": "neumann"},
        ],
        shape={"rectangle": {"corner": [0, 0], "size": [2, 1]}},
        domain={"regions": [{"name": "lower", "shape": {"rectangle": {"corner": [0, 0], "size": [2, 0.25]}}}]},
        operator={"diffusion": [{"region": "lower", "value": 0.5}, {"value": 4}]},
        norm={"kind": "diffusion"},
        seconds=12,
    )
    assert_encloses(found["top"], math.sqrt(0.25 / 0.5 + 0.75 / 4), 1e-5)
    assert found["bottom"]["exists"] is False


@pytest.mark.parametrize(("diffusion", "reaction", "length"), [(1, 0.3, 1), (0.2, 0.02, 2), (3, -4, 0.5)])
def test_coercivity_from_the_first_mode(diffusion: float, reaction: float, length: float) -> None:
    """alpha = (K/C^2 + c)/(l^2/C^2 + 1) when c <= K/l^2 (spectrum of the Laplacian, closed form)."""
    found = ask(
        "coercivity",
        HELD,
        operator={"diffusion": diffusion, "reaction": reaction},
        norm={"kind": "h1", "length_scale": length},
    )
    assert_encloses(found, (diffusion / CF2 + reaction) / (length**2 / CF2 + 1), 1e-5)


def test_coercivity_attained_by_oscillation() -> None:
    """alpha = K/l^2 exactly when c > K/l^2: both bounds meet up to rounding (essential spectrum, closed form)."""
    found = ask("coercivity", HELD, operator={"diffusion": 1, "reaction": 3})
    assert_encloses(found, 1.0, 1e-11)


def test_coercivity_may_be_negative() -> None:
    """Seminorm, k^2 = 30: 1 - 30/(2 pi^2) < 0 (closed form)."""
    found = ask("coercivity", HELD, operator={"reaction": -30}, norm={"kind": "seminorm"})
    assert_encloses(found, 1 - 30 * CF2, 1e-5)


def test_coercivity_of_blocks_is_the_smallest_diffusion() -> None:
    """K = mu_i on blocks, seminorm, held all round: alpha = min mu_i (reduced-basis literature, from memory)."""
    found = ask(
        "coercivity",
        HELD,
        domain={"regions": [{"name": "left", "shape": {"rectangle": {"corner": [0, 0], "size": [0.5, 1]}}}]},
        operator={"diffusion": [{"region": "left", "value": 0.3}, {"value": 7}]},
        norm={"kind": "seminorm"},
    )
    assert_encloses(found, 0.3, 1e-11)


def test_solenoidal_flow_does_not_change_coercivity() -> None:
    """b = (d psi/dy, -d psi/dx), held all round: its symmetric part vanishes (closed form as without flow)."""
    found = ask(
        "coercivity",
        HELD,
        operator={"diffusion": 0.2, "velocity": {"stream_function": "3*sin(x)*y"}},
    )
    assert_encloses(found, (0.2 / CF2) / (1 / CF2 + 1), 1e-5)


def test_decay_rate_with_constant_divergence() -> None:
    """b = (x, y), div b = 2, convective form: a(u,u) = |grad u|^2 - |u|^2, so the rate is 2 pi^2 - 1 (closed form)."""
    found = ask("decay_rate", HELD, operator={"velocity": ["x", "y"]})
    assert_encloses(found, 2 * math.pi**2 - 1, 1e-5)


def test_decay_rate_conservative_form_turns_the_sign() -> None:
    """The same flow in conservative form: + |u|^2."""
    found = ask("decay_rate", HELD, operator={"velocity": ["x", "y"], "form": "conservative"})
    assert_encloses(found, 2 * math.pi**2 + 1, 1e-5)


def test_robin_decay_rate() -> None:
    """u'' = -k^2 u on (0,1), Robin alpha at both ends, natural above and below: tan k = 2 k alpha/(k^2 - alpha^2).

    For alpha = 1 the smallest root is k = 1.306542374188806 (elementary; root recomputed here).
    """
    low, high = 1.1, 1.5
    for _ in range(200):
        middle = (low + high) / 2
        low, high = (low, middle) if math.tan(middle) * (middle**2 - 1) > 2 * middle else (middle, high)
    found = ask(
        "decay_rate",
        [
            {"name": "left", "on": {"segment": [[0, 0], [0, 1]]}, "condition": "robin", "exchange": 1},
            {"name": "right", "on": {"segment": [[1, 0], [1, 1]]}, "condition": "robin", "exchange": 1},
            {"name": "rest", "on": "remainder", "condition": "neumann"},
        ],
    )
    assert_encloses(found, low**2, 1e-5)


def test_interface_term_of_a_jumping_normal_velocity() -> None:
    """b = (-1,0) left of the middle line and (1,0) right of it: [b.n]/2 = -1 there, b.n/2 = +1/2 at both ends.

    With s the distance from the middle, v = exp(-s/2) meets v' = -v/2 at both ends of (0, 1/2): the smallest ratio
    is -1/4 (elementary).
    """
    found = ask(
        "decay_rate",
        FREE,
        tolerance=1e-3,
        domain={"regions": [{"name": "left", "shape": {"rectangle": {"corner": [0, 0], "size": [0.5, 1]}}}]},
        operator={"velocity": [{"region": "left", "value": [-1, 0]}, {"value": [1, 0]}]},
    )
    assert_encloses(found, -0.25, 1e-3)
