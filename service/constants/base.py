"""What a constant is: a question about one pencil, and the inequality its answer proves."""

from collections.abc import Callable
from dataclasses import dataclass

from service.forms.form import Pencil
from service.meshing.mesh import Mesh
from service.problem.domain import PlaneDomain
from service.problem.request import Request


@dataclass(frozen=True)
class Question:
    """C = tau_index^(-1/2) for the ratios tau of a pencil.

    domain : the domain with the conditions that matter for this constant.
    pencil : the pencil on a mesh of that domain.
    index : number of the ratio, from 1.
    statement : the inequality, with C standing for the constant.
    unit : unit of C in the user's units.
    """

    domain: PlaneDomain
    pencil: Callable[[Mesh], Pencil]
    index: int
    statement: str
    unit: str


@dataclass(frozen=True)
class Absent:
    """The constant does not exist for this problem, and what to ask for instead."""

    statement: str


@dataclass(frozen=True)
class Constant:
    """One constant the service knows: its id, what it is, and how a problem turns it into a question."""

    id: str
    title: str
    ask: Callable[[Request], Question | Absent]
