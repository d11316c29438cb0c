"""The truth about jobs: every change is one guarded SQL statement."""

import time
import uuid
from collections.abc import Iterable
from typing import Any

from sqlalchemy import Engine, Update, and_, case, delete, func, insert, or_, select, update

from service.jobs import canonical
from service.jobs.job import Job, Request, Task
from service.jobs.lifecycle import ABANDON, CLAIM, DISMISS, FAIL, MOVES, PURGE, SUCCEED, Move, State
from service.jobs.rows import STATUS, TASK, job_from, task_from
from service.jobs.tables import jobs
from service.processes.base import JSON


class Store:
    """Jobs in a SQL database, shared by threads, processes and hosts.

    retention : seconds a job is kept after it ended.
    """

    def __init__(self, engine: Engine, retention: float) -> None:
        self.engine = engine
        self.retention = retention

    def close(self) -> None:
        """Give the connections back."""
        self.engine.dispose()

    def ping(self) -> None:
        """Raise ``sqlalchemy.exc.SQLAlchemyError`` when the database does not answer."""
        with self.engine.connect() as connection:
            connection.execute(select(1))

    # Clients

    def submit(self, request: Request) -> Job:
        """Record a new job: accepted, or successful at once when its result is known."""
        now = time.time()
        known = self._known(request.digest)
        values: dict[str, Any] = {
            "id": str(uuid.uuid4()),
            "process": request.process,
            "inputs": canonical.encode(request.inputs) if known is None else "",
            "response": request.response,
            "outputs": canonical.encode(list(request.outputs)),
            "digest": request.digest,
            "created": now,
            "updated": now,
        }
        if known is None:
            values |= {"state": State.ACCEPTED, "message": "queued"}
        else:
            values |= {
                "state": State.SUCCESSFUL,
                "message": f"answered from the result of job {known[0]}",
                "progress": 100,
                "result": known[1],
                "computed_by": known[0],
                "started": now,
                "finished": now,
                "expires": now + self.retention,
            }
        with self.engine.begin() as connection:
            row = connection.execute(insert(jobs).values(values).returning(*STATUS)).one()
        return job_from(row)

    def _known(self, digest: str) -> tuple[str, str] | None:
        statement = (
            select(jobs.c.id, jobs.c.result)
            .where(jobs.c.digest == digest, jobs.c.state == State.SUCCESSFUL, jobs.c.reusable == 1)
            .order_by(jobs.c.created)
            .limit(1)
        )
        with self.engine.connect() as connection:
            row = connection.execute(statement).one_or_none()
        return None if row is None else (row.id, row.result)

    def find(self, job_id: str) -> Job | None:
        """The job of that id, or None."""
        with self.engine.connect() as connection:
            row = connection.execute(select(*STATUS).where(jobs.c.id == job_id)).one_or_none()
        return None if row is None else job_from(row)

    def result(self, job_id: str) -> str | None:
        """The JSON text of a successful job's result, else None."""
        with self.engine.connect() as connection:
            return connection.execute(select(jobs.c.result).where(jobs.c.id == job_id)).scalar()

    def dismiss(self, job_id: str) -> Job | None:
        """Stop a live job, or remove what a finished one left; None when there was nothing to do."""
        now = time.time()
        ending = {"finished": now, "updated": now, "expires": now + self.retention, "inputs": ""}
        stop = _move(DISMISS, job_id).values(**ending, message="dismissed on request")
        purge = _move(PURGE, job_id).values(
            inputs="",
            partial=None,
            result=None,
            reusable=0,
            failure=None,
            updated=now,
            message="dismissed on request after it had ended; its results were removed",
        )
        with self.engine.begin() as connection:
            for statement in (stop, purge):
                row = connection.execute(statement.returning(*STATUS)).one_or_none()
                if row is not None:
                    return job_from(row)
        return None

    # Workers

    def claim(self, owner: str, lease: float, attempts: int) -> Task | None:
        """Take the oldest job that waits, or whose owner fell silent; None when there is none."""
        now = time.time()
        free = or_(
            jobs.c.state == State.ACCEPTED,
            and_(jobs.c.state == State.RUNNING, jobs.c.lease < now, jobs.c.attempt < attempts),
        )
        # SKIP LOCKED where the database has it; SQLite has one writer at a time and leaves it out.
        oldest = (
            select(jobs.c.id)
            .where(free)
            .order_by(jobs.c.created, jobs.c.id)
            .limit(1)
            .with_for_update(skip_locked=True)
            .scalar_subquery()
        )
        statement = (
            update(jobs)
            .where(jobs.c.id == oldest, free)
            .values(
                state=CLAIM.target,
                owner=owner,
                lease=now + lease,
                attempt=jobs.c.attempt + 1,
                started=func.coalesce(jobs.c.started, now),
                updated=now,
                message=case((jobs.c.state == State.ACCEPTED, "started"), else_=jobs.c.message),
            )
            .returning(*TASK)
        )
        with self.engine.begin() as connection:
            row = connection.execute(statement).one_or_none()
        return None if row is None else task_from(row)

    def waiting(self) -> bool:
        """Whether any job could be claimed now."""
        statement = select(jobs.c.id).where(
            or_(
                jobs.c.state == State.ACCEPTED,
                and_(jobs.c.state == State.RUNNING, jobs.c.lease < time.time()),
            )
        )
        with self.engine.connect() as connection:
            return connection.execute(statement.limit(1)).one_or_none() is not None

    def renew(self, owner: str, lease: float) -> set[tuple[str, int]]:
        """Extend the leases of everything ``owner`` runs; returns (id, attempt) of what it still owns."""
        statement = (
            update(jobs)
            .where(jobs.c.owner == owner, jobs.c.state == State.RUNNING)
            .values(lease=time.time() + lease)
            .returning(jobs.c.id, jobs.c.attempt)
        )
        with self.engine.begin() as connection:
            return {(row.id, row.attempt) for row in connection.execute(statement)}

    def report(self, task: Task, progress: int, message: str, partial: JSON) -> bool:
        """Write down how far the task is; False when it is not ours any more."""
        return self._write(
            update(jobs)
            .where(*_fence(task), jobs.c.state == State.RUNNING)
            .values(
                progress=progress,
                message=message,
                partial=canonical.text(partial),
                updated=time.time(),
            )
        )

    def succeed(self, task: Task, result: JSON, message: str, *, reusable: bool) -> bool:
        """End the task with its result; False when it is not ours any more.

        reusable : whether the result may answer later requests of the same digest.
        """
        return self._end(
            task,
            SUCCEED,
            message=message,
            progress=100,
            result=canonical.text(result),
            reusable=int(reusable),
            partial=None,
        )

    def fail(self, task: Task, failure: JSON) -> bool:
        """End the task with a problem document; False when it is not ours any more."""
        return self._end(task, FAIL, message=failure["detail"], failure=canonical.text(failure))

    def _end(self, task: Task, move: Move, **values: Any) -> bool:
        now = time.time()
        return self._write(
            _move(move, task.id)
            .where(*_fence(task))
            .values(**values, inputs="", finished=now, updated=now, expires=now + self.retention)
        )

    def release(self, owners: Iterable[str]) -> None:
        """Let others have what these owners run; the interrupted attempt does not count."""
        self._write(
            update(jobs)
            .where(jobs.c.owner.in_(list(owners)), jobs.c.state == State.RUNNING)
            .values(lease=0.0, attempt=jobs.c.attempt - 1, owner=None)
        )

    def lapse(self, owners: Iterable[str]) -> None:
        """End at once the leases of owners known to be dead."""
        self._write(
            update(jobs)
            .where(jobs.c.owner.in_(list(owners)), jobs.c.state == State.RUNNING)
            .values(lease=0.0)
        )

    def owners(self) -> set[str]:
        """Who runs jobs at present."""
        statement = select(jobs.c.owner).where(jobs.c.state == State.RUNNING, jobs.c.owner.is_not(None))
        with self.engine.connect() as connection:
            return set(connection.execute(statement.distinct()).scalars())

    def abandon(self, attempts: int, failure: JSON) -> list[str]:
        """Fail the jobs under which the service died too often; returns their ids."""
        now = time.time()
        statement = (
            update(jobs)
            .where(jobs.c.state.in_(ABANDON.sources), jobs.c.lease < now, jobs.c.attempt >= attempts)
            .values(
                state=ABANDON.target,
                message=failure["detail"],
                failure=canonical.text(failure),
                inputs="",
                finished=now,
                updated=now,
                expires=now + self.retention,
            )
            .returning(jobs.c.id)
        )
        with self.engine.begin() as connection:
            return list(connection.execute(statement).scalars())

    def expire(self) -> None:
        """Delete what is kept no longer."""
        with self.engine.begin() as connection:
            connection.execute(delete(jobs).where(jobs.c.expires < time.time()))

    def _write(self, statement: Update) -> bool:
        with self.engine.begin() as connection:
            return connection.execute(statement).rowcount > 0


def _move(move: Move, job_id: str) -> Update:
    assert move in MOVES.values()
    return update(jobs).where(jobs.c.id == job_id, jobs.c.state.in_(move.sources)).values(state=move.target)


def _fence(task: Task) -> tuple[Any, ...]:
    return jobs.c.owner == task.owner, jobs.c.attempt == task.attempt
