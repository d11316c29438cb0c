"""The engine without further parts: threads in the service, each seeing one child through one job."""

import logging
import threading
import time
from collections.abc import Callable, Mapping
from contextlib import closing
from dataclasses import dataclass
from itertools import count
from typing import Any

from sqlalchemy.exc import SQLAlchemyError

from service.jobs import failures
from service.jobs.bells import Bells
from service.jobs.job import Task
from service.jobs.logs import Logs
from service.jobs.nursery import Child, Nursery
from service.jobs.owner import certainly_dead, identity
from service.jobs.run import Done, Failed, Outcome, Run, Stopped
from service.jobs.store import Store
from service.processes.base import JSON, Process

logger = logging.getLogger("wellposed.jobs")

_IDLE = 1.0
_BOOT = 60.0
_SWEEP = 60.0


@dataclass(frozen=True)
class Terms:
    """On what terms jobs are computed; times in seconds, memory in bytes."""

    workers: int
    wall: float
    grace: float
    memory: int
    lease: float
    attempts: int


class Supervisors:
    """``terms.workers`` threads that claim, watch and finish jobs, and one that keeps house."""

    def __init__(
        self,
        store: Store,
        processes: Mapping[str, Process],
        nursery: Nursery,
        bells: Bells,
        logs: Logs,
        terms: Terms,
    ) -> None:
        self._store = store
        self._processes = processes
        self._nursery = nursery
        self._bells = bells
        self._logs = logs
        self._terms = terms
        self._owner = identity()
        self._lock = threading.Lock()
        self._runs: dict[str, Run] = {}
        self._cancelled_early: set[str] = set()
        self._submitted = threading.Semaphore(0)
        self._stopping = threading.Event()
        self._booted = threading.Event()
        self._threads = [
            threading.Thread(target=self._work, name=f"supervisor-{number}", daemon=True)
            for number in range(terms.workers)
        ] + [threading.Thread(target=self._keep_house, name="housekeeper", daemon=True)]

    def start(self) -> None:
        """Begin to take jobs; those of a service that died on this machine are free at once."""
        self._take_over()
        for thread in self._threads:
            thread.start()

    def stop(self) -> None:
        """Kill what runs and leave it to the next service, as if it had not been started."""
        self._stopping.set()
        with self._lock:
            for run in self._runs.values():
                run.stop(Stopped.SHUTDOWN)
        self._submitted.release(self._terms.workers)
        for thread in self._threads:
            thread.join(5.0)
        self._store.release([self._owner])

    def wake(self) -> None:
        """A job has been submitted."""
        self._submitted.release()

    def cancel(self, job_id: str) -> None:
        """Kill the job's child now, if it has one here."""
        with self._lock:
            run = self._runs.get(job_id)
            if run is None:
                self._cancelled_early.add(job_id)  # perhaps claimed, and not yet among the runs
            else:
                run.stop(Stopped.DISMISSED)

    def ready(self) -> bool:
        """Whether a child stands ready or computes, and no stop is under way."""
        return self._booted.is_set() and not self._stopping.is_set()

    # One supervisor

    def _work(self) -> None:
        while not self._stopping.is_set():
            try:
                # Forked ahead of its task: a waiting request does not wait for this.
                with closing(self._nursery.child()) as child:
                    self._see_through(child)
            except Exception:
                # The fork server may just have died, or the database: never the supervisor.
                logger.exception("a supervisor stumbled and goes on")
                self._stopping.wait(_IDLE)

    def _see_through(self, child: Child) -> None:
        if not self._hears_from(child):
            logger.error("a child did not come up")
            self._stopping.wait(_IDLE)
            return
        self._booted.set()
        while not self._stopping.is_set() and child.exitcode() is None:
            task = self._store.claim(self._owner, self._terms.lease, self._terms.attempts)
            if task is not None:
                self._compute(task, child)
                return
            self._submitted.acquire(timeout=_IDLE)

    def _hears_from(self, child: Child) -> bool:
        deadline = time.monotonic() + _BOOT
        while time.monotonic() < deadline and not self._stopping.is_set():
            if child.pipe.poll(0.1):
                try:
                    return bool(child.pipe.recv_bytes())
                except EOFError:
                    return False
        return False

    def _compute(self, task: Task, child: Child) -> None:
        try:
            limits = self._processes[task.process].limits(task.inputs)
        except Exception:
            logger.exception("job %s: its process does not know it any more", task.id)
            self._finish(task, Failed(failures.internal_error(task.id)))
            return
        run = Run(
            task,
            child,
            seconds=min(limits.seconds + self._terms.grace, self._terms.wall),
            memory=self._terms.memory,
            log=self._logs.path(task.id),
            record=lambda progress, message, partial: self._record(task, progress, message, partial),
        )
        with self._lock:
            self._runs[task.id] = run
            if task.id in self._cancelled_early:
                run.stop(Stopped.DISMISSED)
            if self._stopping.is_set():
                run.stop(Stopped.SHUTDOWN)
        try:
            outcome = run.outcome()
        finally:
            with self._lock:
                del self._runs[task.id]
            run.close()
        self._finish(task, outcome)
        self._logs.tidy(task.id)

    def _record(self, task: Task, progress: int, message: str, partial: JSON) -> bool:
        try:
            return self._store.report(task, progress, message, partial)
        except SQLAlchemyError:
            logger.warning("job %s: progress could not be stored", task.id, exc_info=True)
            return True

    def _finish(self, task: Task, outcome: Outcome) -> None:
        match outcome:
            case Done(result, complete):
                reusable = complete and result.get("target_met") is not False
                message = _closing_message(result)
                self._insist(lambda: self._store.succeed(task, result, message, reusable=reusable))
            case Failed(problem):
                self._insist(lambda: self._store.fail(task, problem))
            case Stopped():
                logger.info("job %s stopped: %s", task.id, outcome.value)
        self._bells.ring(task.id)

    def _insist(self, write: Callable[[], Any]) -> None:
        """Repeat a write while the database is away; in the end the lease lapses and the job is re-run."""
        for attempt in count(1):
            try:
                write()
                return
            except SQLAlchemyError:
                if attempt == 10 or self._stopping.wait(min(0.1 * 2**attempt, 5.0)):
                    raise

    # The housekeeper

    def _keep_house(self) -> None:
        swept = 0.0
        while not self._stopping.wait(self._terms.lease / 3):
            try:
                self._renew()
                self._take_over()
                if time.monotonic() - swept > _SWEEP:
                    swept = time.monotonic()
                    self._store.expire()
                    self._logs.expire()
            except Exception:
                logger.exception("the housekeeper stumbled and goes on")

    def _renew(self) -> None:
        with self._lock:
            runs = list(self._runs.values())
            self._cancelled_early.clear()
        ours = self._store.renew(self._owner, self._terms.lease)
        for run in runs:
            if (run.task.id, run.task.attempt) not in ours:
                with self._lock:
                    if self._runs.get(run.task.id) is run:
                        run.stop(Stopped.DISMISSED)

    def _take_over(self) -> None:
        dead = [owner for owner in self._store.owners() if owner != self._owner and certainly_dead(owner)]
        if dead:
            self._store.lapse(dead)
        failure = failures.worker_lost(self._terms.attempts)
        for job_id in self._store.abandon(self._terms.attempts, failure):
            self._bells.ring(job_id)
        if self._store.waiting():
            self.wake()


def _closing_message(result: JSON) -> str:
    match result.get("target_met"):
        case True:
            return "finished: the target width was reached"
        case False:
            return "finished before the target width was reached: the result's warnings say why"
    return "finished"
