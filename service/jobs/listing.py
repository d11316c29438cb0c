"""Which jobs a list shows: filters and paging, newest first."""

import time
from dataclasses import dataclass
from typing import Any

from sqlalchemy import ColumnElement, Engine, and_, case, or_, select

from service.jobs.job import Job
from service.jobs.lifecycle import State
from service.jobs.rows import SUMMARY, job_from
from service.jobs.tables import jobs


@dataclass(frozen=True)
class Query:
    """Filters of a list of jobs; an empty tuple or None leaves a filter out.

    created : earliest and latest time of creation, seconds since the epoch, ends included.
    shortest, longest : duration in seconds, ends included: of a running job so far, of an ended one in all.
    after : (created, id) of the last job of the page before.
    """

    processes: tuple[str, ...] = ()
    states: tuple[State, ...] = ()
    created: tuple[float | None, float | None] = (None, None)
    shortest: float | None = None
    longest: float | None = None
    after: tuple[float, str] | None = None
    limit: int = 10


def find(engine: Engine, query: Query) -> tuple[list[Job], bool]:
    """At most ``query.limit`` jobs, and whether more follow."""
    statement = (
        select(*SUMMARY)
        .where(*_conditions(query))
        .order_by(jobs.c.created.desc(), jobs.c.id.desc())
        .limit(query.limit + 1)
    )
    with engine.connect() as connection:
        found = [job_from(row) for row in connection.execute(statement)]
    return found[: query.limit], len(found) > query.limit


def knows(engine: Engine, process: str) -> bool:
    """Whether any job of that process is kept."""
    with engine.connect() as connection:
        statement = select(jobs.c.id).where(jobs.c.process == process).limit(1)
        return connection.execute(statement).one_or_none() is not None


def _conditions(query: Query) -> list[ColumnElement[bool]]:
    earliest, latest = query.created
    conditions: list[Any] = []
    if query.processes:
        conditions.append(jobs.c.process.in_(query.processes))
    if query.states:
        conditions.append(jobs.c.state.in_(query.states))
    if earliest is not None:
        conditions.append(jobs.c.created >= earliest)
    if latest is not None:
        conditions.append(jobs.c.created <= latest)
    if query.shortest is not None or query.longest is not None:
        conditions.extend(_durations(query))
    if query.after is not None:
        created, job_id = query.after
        conditions.append(or_(jobs.c.created < created, and_(jobs.c.created == created, jobs.c.id < job_id)))
    return conditions


def _durations(query: Query) -> list[Any]:
    # A job without the times it needs has no duration, and NULL matches nothing.
    end = case((jobs.c.state == State.RUNNING, time.time()), else_=jobs.c.finished)
    duration = end - jobs.c.started
    conditions: list[Any] = []
    if query.shortest is not None:
        conditions.append(duration >= query.shortest)
    if query.longest is not None:
        conditions.append(duration <= query.longest)
    return conditions
