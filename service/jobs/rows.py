"""Rows of the table of jobs read into the types of `job`."""

import json
from typing import Any

from sqlalchemy import Row, null

from service.jobs.job import Job, Task
from service.jobs.lifecycle import State
from service.jobs.tables import jobs

_HEAD = tuple(
    jobs.c[name]
    for name in (
        "id",
        "process",
        "response",
        "outputs",
        "digest",
        "state",
        "attempt",
        "progress",
        "message",
        "failure",
        "computed_by",
        "created",
        "started",
        "finished",
        "updated",
        "expires",
    )
)
STATUS = (*_HEAD, jobs.c.partial)
"""Columns of a `Job`."""

SUMMARY = (*_HEAD, null().label("partial"))
"""Columns of a `Job` for a list, its partial result left where it is."""

TASK = tuple(
    jobs.c[name]
    for name in ("id", "owner", "attempt", "process", "inputs", "digest", "progress", "message", "partial")
)
"""Columns of a `Task`."""


def job_from(row: Row[Any]) -> Job:
    """A row of ``STATUS`` or ``SUMMARY``."""
    values = dict(row._mapping)
    values["state"] = State(values["state"])
    values["outputs"] = tuple(json.loads(values["outputs"]))
    values["partial"] = _decoded(values["partial"])
    values["failure"] = _decoded(values["failure"])
    return Job(**values)


def task_from(row: Row[Any]) -> Task:
    """A row of ``TASK``."""
    values = dict(row._mapping)
    values["inputs"] = json.loads(values["inputs"])
    values["partial"] = _decoded(values["partial"])
    return Task(**values)


def _decoded(text: str | None) -> Any:
    return None if text is None else json.loads(text)
