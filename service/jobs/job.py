"""A job as the store holds it, seen by those who ask (Job) and by those who compute it (Task)."""

from dataclasses import dataclass
from typing import Any, Literal

from service.jobs.lifecycle import State
from service.processes.base import JSON

Response = Literal["raw", "document"]


@dataclass(frozen=True)
class Request:
    """What a client asked for, checked: the process, its canonical inputs and the form of the answer.

    outputs : ids of the outputs asked for, in the order of the process description.
    digest : `canonical.digest` of process and inputs.
    """

    process: str
    inputs: JSON
    response: Response
    outputs: tuple[str, ...]
    digest: str


@dataclass(frozen=True)
class Job:
    """The status of one job. Times are seconds since the epoch (UTC), None where not reached.

    progress : per cent, 0 to 100.
    partial : the result so far, a complete result document; None before the first.
    failure : the problem document (RFC 9457) of a failed job.
    computed_by : id of the job whose result answered this one; None when it was computed itself.
    """

    id: str
    process: str
    response: Response
    outputs: tuple[str, ...]
    digest: str
    state: State
    attempt: int
    progress: int
    message: str
    partial: JSON | None
    failure: dict[str, Any] | None
    computed_by: str | None
    created: float
    started: float | None
    finished: float | None
    updated: float
    expires: float | None


@dataclass(frozen=True)
class Task:
    """A job claimed for computing; ``owner`` and ``attempt`` fence everything written about it."""

    id: str
    owner: str
    attempt: int
    process: str
    inputs: JSON
    digest: str
    progress: int
    message: str
    partial: JSON | None
