"""What a process is: a description, a check of its inputs, and a computation that reports as it goes."""

from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

JSON = dict[str, Any]

Report = Callable[[float, str, JSON], None]
"""``report(percent, message, result_so_far)``: a valid, complete result document at every call."""


@dataclass(frozen=True)
class Limits:
    """Bounds of one run: wall-clock seconds and unknowns; the run stops itself and keeps its result."""

    seconds: float
    unknowns: int


@dataclass(frozen=True)
class Process:
    """One executable process of the service.

    accept : checks the plain inputs (OGC value wrappers already removed) and returns them with every
        default filled in, in a canonical form fit for a digest; raises ProblemError with pointers
        that start at the inputs object (``/problem/domain/...``).
    run : computes; takes what ``accept`` returned; raises ComputationError. Called in a child process.
    limits : reads the run's own limits from what ``accept`` returned.
    inputs, outputs : maps of OGC input and output descriptions (closed schema dialect).
    """

    id: str
    title: str
    description: str
    version: str
    inputs: dict[str, JSON]
    outputs: dict[str, JSON]
    accept: Callable[[JSON], JSON]
    run: Callable[[JSON, Report], JSON]
    limits: Callable[[JSON], Limits]
    job_control: tuple[str, ...] = ("sync-execute", "async-execute", "dismiss")
    keywords: tuple[str, ...] = field(default=())
