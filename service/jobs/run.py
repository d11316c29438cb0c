"""Watches one child compute one task: progress, limits, cancelling, crashes."""

import json
import logging
import multiprocessing
import time
from collections.abc import Callable
from dataclasses import dataclass
from enum import Enum
from multiprocessing.connection import wait
from pathlib import Path
from typing import Any

from service.errors import ComputationError
from service.jobs import failures, partials
from service.jobs.job import Task
from service.jobs.lifecycle import progress_while_running
from service.jobs.nursery import Child
from service.processes.base import JSON

logger = logging.getLogger("wellposed.jobs")

_POLL = 0.05
_WRITE_EVERY = 0.1
_LAST_BREATH = 0.5  # between a child's last pipe closing and its exit code


@dataclass(frozen=True)
class Done:
    """The task has a result. ``complete`` unless a limit from outside cut it short."""

    result: JSON
    complete: bool = True


@dataclass(frozen=True)
class Failed:
    """The task ended without a result; ``problem`` is the problem document."""

    problem: JSON


class Stopped(Enum):
    """The task was taken from the child."""

    DISMISSED = "dismissed, or someone else's by now"
    SHUTDOWN = "the service goes down; the job waits for the next"


Outcome = Done | Failed | Stopped
Record = Callable[[int, str, JSON], bool]
"""Stores progress, message and partial result; False when the task is not ours any more."""


class Run:
    """One task in one child.

    seconds : wall-clock time after which the child is killed.
    memory : resident bytes at which it is killed.
    record : called with progress, at most every 0.1 s.
    """

    def __init__(
        self, task: Task, child: Child, *, seconds: float, memory: int, log: Path, record: Record
    ) -> None:
        self.task = task
        self._child = child
        self._seconds = seconds
        self._memory = memory
        self._log = log
        self._record = record
        self._why: Stopped | None = None
        self._hear, self._tell = multiprocessing.Pipe(duplex=False)
        self._progress, self._message, self._partial = task.progress, task.message, task.partial
        self._caught_up = False
        self._unwritten = False
        self._written = 0.0

    def stop(self, why: Stopped) -> None:
        """End the run from another thread, at once."""
        self._why = self._why or why
        self._tell.send_bytes(b"stop")

    def outcome(self) -> Outcome:
        """Compute: blocks until the task has ended one way or another; the child ends with it."""
        try:
            self._child.assign(self.task, self._log)
            outcome = self._watch(time.monotonic() + self._seconds)
        except OSError:
            outcome = self._crashed()
        if isinstance(outcome, Failed):
            self._write(last=True)
        return outcome

    def close(self) -> None:
        """Give the handles back, after the last `stop`."""
        self._hear.close()
        self._tell.close()

    def _watch(self, deadline: float) -> Outcome:
        child = self._child
        while True:
            # Not longer than a poll: memory is looked at between.
            ready = wait([child.pipe, child.sentinel, self._hear], _POLL)
            if self._hear in ready:
                child.kill()
                return self._why or Stopped.DISMISSED
            # A child that has just ended may have sent its result before.
            if child.pipe in ready or (child.sentinel in ready and child.pipe.poll()):
                try:
                    outcome = self._take(json.loads(child.pipe.recv_bytes()))
                except (EOFError, OSError):
                    return self._crashed()
                if outcome is not None:
                    return outcome
            elif child.sentinel in ready:
                return self._crashed()
            if time.monotonic() > deadline:
                child.kill()
                return self._out_of_time()
            if child.resident() > self._memory:
                child.kill()
                return Failed(failures.memory_limit(self._memory))
            if not self._write():
                child.kill()
                return Stopped.DISMISSED

    def _take(self, message: dict[str, Any]) -> Outcome | None:
        match message:
            case {"percent": percent, "message": text, "partial": partial}:
                self._report(percent, text, partial)
            case {"result": result}:
                return Done(result)
            case {"refused": refused}:
                return Failed(failures.refused(ComputationError(**refused)))
            case {"memory": _}:
                return Failed(failures.memory_limit(self._memory))
            case {"bug": name}:
                logger.error("job %s: %s in the computation, see %s", self.task.id, name, self._log)
                return Failed(failures.internal_error(self.task.id))
        return None

    def _report(self, percent: float, text: str, partial: JSON) -> None:
        # A second attempt starts over; until it has come as far, what the first one found stands.
        if not self._caught_up and percent < self.task.progress:
            return
        self._caught_up = True
        self._progress = progress_while_running(percent, self._progress)
        self._message, self._partial = text, partial
        self._unwritten = True

    def _write(self, *, last: bool = False) -> bool:
        now = time.monotonic()
        due = last or now - self._written >= _WRITE_EVERY
        if not self._unwritten or self._partial is None or not due:
            return True
        self._unwritten, self._written = False, now
        return self._record(self._progress, self._message, self._partial)

    def _out_of_time(self) -> Outcome:
        if self._partial is not None and partials.has_enclosure(self._partial):
            return Done(partials.cut_short(self._partial, self._seconds), complete=False)
        return Failed(failures.time_limit(self._seconds))

    def _crashed(self) -> Failed:
        wait([self._child.sentinel], _LAST_BREATH)
        self._child.kill()
        wait([self._child.sentinel], _LAST_BREATH)
        exitcode = self._child.exitcode()
        logger.error("job %s: worker ended with exit code %s, see %s", self.task.id, exitcode, self._log)
        return Failed(failures.worker_crashed(exitcode))
