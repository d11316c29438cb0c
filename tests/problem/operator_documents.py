"""Inputs with regions, coefficients and a norm."""

import copy
from typing import Any

from problem_documents import SQUARE, inputs, part, polygon

REGIONS = [
    {"name": "bed", "shape": {"rectangle": {"corner": [-1, -1], "size": [1.5, 2]}}},
    {"name": "bank", "shape": polygon([[0.25, 0], [1, 0], [1, 0.75]])},
]


def rich() -> dict[str, Any]:
    """A valid document in which every member of regions, operator and norm occurs."""
    made = inputs(
        polygon(SQUARE, [[0.4, 0.4], [0.6, 0.4], [0.6, 0.6], [0.4, 0.6]]),
        [
            part("inflow", {"segment": [[0, 0.25], [0, 0.75]]}),
            {
                **part("island", {"box": [[0.3, 0.3], [0.7, 0.7]]}, "robin"),
                "exchange": [{"region": "bank", "value": "-x"}, {"value": 0.5}],
            },
            part("banks", "remainder", "neumann"),
        ],
    )
    made["problem"]["domain"]["regions"] = REGIONS
    made["problem"]["operator"] = {
        "diffusion": [{"value": "1 + x^2"}, {"region": "bed", "value": [[1, "0.2*x"], [0, 2]]}],
        "velocity": [{"region": "bank", "value": [1, "y"]}, {"value": ["x*y", 0]}],
        "reaction": "x - y",
        "form": "conservative",
    }
    made["problem"]["norm"] = {"kind": "h1", "length_scale": 50}
    return copy.deepcopy(made)


def with_operator(**members: Any) -> dict[str, Any]:
    """The unit square with the regions left (x < 1/2) and right, and some members of the operator."""
    made = inputs(polygon(SQUARE))
    made["problem"]["domain"]["regions"] = [
        {"name": name, "shape": {"rectangle": {"corner": [x, 0], "size": [0.5, 1]}}}
        for name, x in (("left", 0), ("right", 0.5))
    ]
    made["problem"]["operator"] = members
    return made


def by_region(default: Any, **values: Any) -> list[dict[str, Any]]:
    """A list by region."""
    return [*({"region": name, "value": value} for name, value in values.items()), {"value": default}]
