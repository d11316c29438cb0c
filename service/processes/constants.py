"""The process ``constants``: enclosures of the chosen constants of one problem."""

import math
import sys
import time
from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import partial
from typing import Any

import numpy as np

import service
from service.bounds.enclosure import Enclosure
from service.bounds.refine import Budget, Step
from service.constants.base import Absent, Question
from service.constants.registry import CONSTANTS
from service.errors import ComputationError
from service.forms.sampled import Carrier
from service.meshing.generate import mesh_domain
from service.meshing.mesh import Mesh
from service.meshing.quality import edge_vectors
from service.problem.operator import Samples
from service.problem.request import Request, canonical, read_request
from service.problem.schema import input_descriptions
from service.processes.base import JSON, Limits, Process, Report
from service.processes.derived import flow_numbers, margins
from service.processes.schemas import CONSTANTS_OUTPUT

GRADING = 1e-2
"""Corner layers go on until what is left there is this share of the wanted width."""

CELL_UNKNOWNS = 12
"""Unknowns per triangle at the lowest order, at least."""


Path = tuple[str, ...]
"""Where a constant stands in the result: its id, and the boundary part if it has one for each."""


@dataclass
class Tally:
    """What one run knows so far; turned into a result document at any time."""

    request: Request
    begun: float
    constants: dict[str, JSON] = field(default_factory=dict)
    history: list[JSON] = field(default_factory=list)
    mesh: JSON = field(default_factory=dict)
    warnings: list[str] = field(default_factory=list)
    found: dict[str, Enclosure] = field(default_factory=dict)
    numbers: JSON = field(default_factory=dict)

    def asked(self, name: str) -> list[tuple[Path, Question]]:
        """The questions of one constant, each with where its answer goes; constants that do not exist are entered."""
        asked = CONSTANTS[name].ask(self.request)
        pairs: list[tuple[Path, Question | Absent]] = (
            [((name, part), one) for part, one in asked.items()] if isinstance(asked, Mapping) else [((name,), asked)]
        )
        for path, one in pairs:
            if isinstance(one, Absent):
                self.place(path, {"exists": False, "statement": one.statement})
        return [(path, one) for path, one in pairs if isinstance(one, Question)]

    def place(self, path: Path, value: JSON) -> None:
        """Enter what is known of a constant (of a part)."""
        if len(path) == 1:
            self.constants[path[0]] = value
        else:
            self.constants.setdefault(path[0], {})[path[1]] = value

    def at(self, path: Path) -> JSON | None:
        """What is known of a constant (of a part)."""
        value: JSON | None = self.constants.get(path[0])
        return value if value is None or len(path) == 1 else value.get(path[1])

    def entries(self) -> list[JSON]:
        """All constants, those of parts one by one."""
        return [
            one for value in self.constants.values() for one in ([value] if "statement" in value else value.values())
        ]

    def document(self) -> JSON:
        """A complete result document."""
        values = self.entries()
        seconds = round(time.monotonic() - self.begun, 4)
        return {
            "target_met": bool(values) and all(value.get("target_met", True) for value in values),
            "constants": dict(self.constants),
            "derived": {**margins(self.request, self.found), **self.numbers},
            "mesh": dict(self.mesh),
            "history": list(self.history),
            "warnings": [*self.request.warnings, *self.warnings],
            "provenance": {
                "service": service.__version__,
                "python": sys.version.split()[0],
                "numpy": np.__version__,
                "seconds": seconds,
            },
        }


def describe(request: Request, question: Question, value: Enclosure) -> JSON:
    """One constant as the result shows it."""
    known = math.isfinite(value.width)
    shown = value.lower_by.startswith("Ritz") or not math.isfinite(value.upper)
    return {
        "lower": float(value.lower) if math.isfinite(value.lower) else None,
        "upper": float(value.upper) if math.isfinite(value.upper) else None,
        "best": float(value.lower if shown and math.isfinite(value.lower) else value.upper),
        "relative_width": float(value.width) if known else None,
        "target_met": bool(value.width <= request.tolerance),
        "rigour": "guaranteed",
        "rounding": "included",
        "unit": question.unit,
        "statement": question.statement,
        "lower_by": value.lower_by,
        "upper_by": value.upper_by,
    }


def sentence(name: str, request: Request, question: Question, value: Enclosure, step: Step) -> str:
    """Where a constant stands, for the person who watches."""
    target = f"target {request.tolerance:.3g}, level {step.level}, order {step.order}"
    size = f"{step.unknowns:,} unknowns"
    if not math.isfinite(value.upper):
        return f"{name} at least {value.lower:.6g} {question.unit}, no upper bound yet, {target}, {size}"
    if not math.isfinite(value.lower):
        return f"{name} at most {value.upper:.6g} {question.unit}, no lower bound yet, {target}, {size}"
    digits = max(4, min(15, 2 - math.floor(math.log10(max(value.width, 1e-13)))))
    interval = f"[{value.lower:.{digits}g}, {value.upper:.{digits}g}] {question.unit}"
    return f"{name} in {interval}, width {value.width:.2g}, {target}, {size}"


def progress(width: float, tolerance: float) -> float:
    """Share of the way from knowing nothing to the wanted width, on a logarithmic scale."""
    if not math.isfinite(width):
        return 0.1
    return min(1.0, max(0.1, math.log(max(width, 1e-16)) / math.log(tolerance)))


def mesh_summary(mesh: Mesh) -> JSON:
    """Counts and sizes in the user's length unit."""
    lengths = np.linalg.norm(edge_vectors(mesh), axis=2) * mesh.unit
    return {
        "triangles": len(mesh.cells),
        "largest_edge": float(np.max(lengths)),
        "smallest_edge": float(np.min(lengths)),
    }


def run(inputs: JSON, report: Report) -> JSON:
    """Narrows the chosen constants one after the other until the tolerance or a limit is met.

    Raises
    ------
    ComputationError
        If the domain cannot be meshed, is in pieces, or nothing could be proved within the limits.
    """
    begun = time.monotonic()
    request = read_request(inputs, CONSTANTS)
    tally = Tally(request, begun)
    questions = [pair for name in chosen(request) for pair in tally.asked(name)]
    last = begun + request.limits.seconds
    mesh: Mesh | None = None
    cells = max(1000, request.limits.unknowns // CELL_UNKNOWNS)
    carrier = Carrier(request, cells) if isinstance(request.operator.velocity, Samples) else None
    if carrier is not None:
        tally.warnings += carrier.remarks()
    for done, (path, question) in enumerate(questions):
        now = time.monotonic()
        deadline = now + (last - now) / (len(questions) - done)
        budget = Budget(request.tolerance, deadline, request.limits.unknowns, tally.found)
        mesh_at = partial(_mesh, question, GRADING * budget.width, cells) if carrier is None else carrier.mesh_at
        name = " ".join(path)
        for step in question.narrow(mesh_at, budget):
            value = step.enclosure
            if not math.isfinite(value.lower) and not math.isfinite(value.upper):
                continue
            tally.place(path, {**describe(request, question, value), **step.more})
            tally.found[name] = value
            if step.mesh is not mesh:
                mesh = step.mesh
                tally.mesh, tally.numbers = mesh_summary(mesh), flow_numbers(request, mesh)
            tally.history.append(
                {
                    "unknowns": step.unknowns,
                    "seconds": round(time.monotonic() - begun, 4),
                    "level": step.level,
                    "order": step.order,
                    "widths": {name: float(value.width) if math.isfinite(value.width) else None},
                }
            )
            percent = 100 * (done + progress(value.width, request.tolerance)) / len(questions)
            report(min(percent, 99.0), sentence(name, request, question, value, step), tally.document())
        found = tally.at(path)
        if found is None:
            tally.place(path, {"rigour": "guaranteed", "target_met": False, "statement": question.statement})
        if found is None or not found["target_met"]:
            tally.warnings.append(
                f"{name}: the tolerance was not met; what is stated is proved all the same. {question.advice}"
            )
    return tally.document()


def _mesh(question: Question, target: float, cells: int, size: float) -> Mesh:
    return mesh_domain(
        question.domain,
        size=size,
        target=target,
        max_cells=cells,
        diffusion=question.materials,
        close=question.close,
    )


def chosen(request: Request) -> tuple[str, ...]:
    """The constants asked for, or the one that makes sense for the boundary conditions."""
    if request.constants is not None:
        return request.constants
    held = any(part.condition == "dirichlet" for part in request.domain.parts)
    return ("friedrichs",) if held else ("poincare",)


def accept(inputs: JSON) -> JSON:
    """Checks the inputs and fills in defaults."""
    return canonical(inputs, CONSTANTS)


def limits(inputs: JSON) -> Limits:
    """The run's own limits, from accepted inputs."""
    stated: dict[str, Any] = inputs["limits"]
    return Limits(float(stated["seconds"]), int(stated["unknowns"]))


def warm() -> None:
    """One small run, so that a fresh child finds everything loaded and every table computed."""
    corner = [[0, 0], [0, -1], [1, -1], [1, 1], [-1, 1], [-1, 0]]
    problem = {
        "domain": {"shape": {"polygon": {"outer": corner}}},
        "boundary": [{"name": "rim", "on": "remainder", "condition": "dirichlet"}],
    }
    try:
        run(accept({"problem": problem, "tolerance": 1e-7}), lambda percent, message, result: None)
    except ComputationError:
        return


CONSTANTS_PROCESS = Process(
    id="constants",
    title="Constants of a problem",
    description=(
        "Guaranteed two-sided enclosures of the constants on which the well-posedness of a problem rests, on the "
        "domain and with the boundary conditions given."
    ),
    version="1.0.0",
    inputs=input_descriptions(CONSTANTS),
    outputs=CONSTANTS_OUTPUT,
    accept=accept,
    run=run,
    limits=limits,
    keywords=("Friedrichs constant", "Poincaré constant", "guaranteed bounds", "well-posedness"),
)
