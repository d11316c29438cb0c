"""What a constant is: a question about forms, and the inequality its answer proves."""

import time
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, replace

from service.bounds.enclosure import Enclosure
from service.bounds.refine import Budget, Step, enclose
from service.forms.form import Pencil
from service.meshing.mesh import Mesh
from service.meshing.outline import Diffusion
from service.meshing.refine import refine
from service.problem.domain import PlaneDomain
from service.problem.request import Request

MeshAt = Callable[[float], Mesh]
"""A mesh with edges of at most a given length in mesh units."""

Narrow = Callable[[MeshAt, Budget], Iterator[Step]]
"""Ever narrower enclosures of a constant in the user's units, until the budget's width or limits."""


@dataclass(frozen=True)
class Question:
    """A constant of one problem.

    domain : the domain with the conditions that matter for this constant.
    narrow : how its enclosure is found.
    statement : the inequality, with C standing for the constant.
    unit : unit of C in the user's units.
    advice : what to do where the tolerance was not met.
    close : numbers of the boundary parts near which meshes are finer.
    materials : how well regions conduct, where that matters for singularities (see ``mesh_domain``).
    """

    domain: PlaneDomain
    narrow: Narrow
    statement: str
    unit: str
    advice: str = "Raise limits.seconds or limits.unknowns for a narrower enclosure."
    close: frozenset[int] = frozenset()
    materials: Diffusion | None = None


@dataclass(frozen=True)
class Absent:
    """The constant does not exist for this problem, and what to ask for instead."""

    statement: str


Asked = Question | Absent | Mapping[str, Question | Absent]
"""One question, or one for each of several boundary parts by name."""


@dataclass(frozen=True)
class Constant:
    """One constant the service knows: its id, what it is, and how a problem turns it into a question."""

    id: str
    title: str
    ask: Callable[[Request], Asked]


def from_ratio(
    pencil_on: Callable[[Mesh], Pencil],
    index: int = 1,
    answer: Callable[[Enclosure], Enclosure] = lambda tau: tau,
    effort: float = 1.0,
) -> Narrow:
    """A constant that is a function of one ratio of a pencil.

    Parameters
    ----------
    pencil_on : the pencil on a mesh, in the user's units.
    index : number of the ratio, from 1.
    answer : the constant's enclosure from the ratio's.
    effort : relative width of the ratio that a relative width 1 of the constant needs.
    """

    def narrow(mesh_at: MeshAt, budget: Budget) -> Iterator[Step]:
        inner = replace(budget, width=effort * budget.width)
        for step in enclose(mesh_at, refine, pencil_on, index, inner):
            yield replace(step, enclosure=answer(step.enclosure))

    return narrow


def inverse_root(pencil_on: Callable[[Mesh], Pencil], index: int = 1) -> Narrow:
    """C = tau_index^(-1/2)."""
    return from_ratio(pencil_on, index, Enclosure.inverse_root, effort=1.9)


def share(deadline: float, part: float) -> float:
    """The end of a part of the time that is left."""
    now = time.monotonic()
    return now + part * (deadline - now)
