"""Starts children: forked from a server process that has the heavy libraries loaded already."""

import multiprocessing
import os
import signal
import sys
import threading
import types
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from multiprocessing import forkserver
from multiprocessing.connection import Connection
from multiprocessing.context import ForkServerProcess
from pathlib import Path

import psutil

from service.jobs import canonical, child, registry
from service.jobs.job import Task

# One thread per child: cores are shared out by the number of children. Read when libraries load.
_PINNED = {
    "OMP_NUM_THREADS": "1",
    "OPENBLAS_NUM_THREADS": "1",
    "MKL_NUM_THREADS": "1",
    "NUMEXPR_NUM_THREADS": "1",
    "VECLIB_MAXIMUM_THREADS": "1",
}
# Same request, same bits: no order may hang on a random seed.
_FIXED = {"PYTHONHASHSEED": "0"}

# Not imported here: importing it is what loads the heavy libraries.
_PRELOAD = "service.jobs.preload"

_start = threading.Lock()


class Child:
    """One child process, waiting for its task or computing it."""

    def __init__(self, process: ForkServerProcess, pipe: Connection) -> None:
        self._process = process
        self.pipe = pipe
        self.sentinel = process.sentinel
        assert process.pid is not None
        self.pid = process.pid

    def assign(self, task: Task, log: Path) -> None:
        """Hand over the task; raises OSError when the child is dead."""
        message = {"process": task.process, "inputs": task.inputs, "log": str(log)}
        self.pipe.send_bytes(canonical.text(message).encode("ascii"))

    def resident(self) -> int:
        """Bytes of memory resident now; 0 when the child is gone."""
        try:
            return int(psutil.Process(self.pid).memory_info().rss)
        except psutil.Error:
            return 0

    def exitcode(self) -> int | None:
        """Exit code, negative for a signal, None while alive."""
        # Two threads must not both read it off the pipe: one would get nothing.
        with _start:
            return self._process.exitcode

    def kill(self) -> None:
        """End the child and everything it started, at once; what it started can outlive it."""
        with suppress(ProcessLookupError):
            os.killpg(self.pid, signal.SIGKILL)
        if self.exitcode() is None:
            # It may not lead its group yet.
            with suppress(ProcessLookupError):
                os.kill(self.pid, signal.SIGKILL)

    def close(self) -> None:
        """See the child out, by force after 0.2 s, and give its handles back."""
        self.pipe.close()
        self._process.join(0.2)
        self.kill()
        self._process.join(1.0)
        with _start, suppress(ValueError):
            self._process.close()


class Nursery:
    """Starts children that know the processes listed at ``processes`` (``module:name``).

    memory : resident bytes a child may use.
    """

    def __init__(self, processes: str, memory: int) -> None:
        self._processes = processes
        self._memory = memory
        self._context = multiprocessing.get_context("forkserver")

    def child(self) -> Child:
        """A new child; it says it is ready on its pipe."""
        ours, theirs = self._context.Pipe()
        process = self._context.Process(
            target=child.main, args=(theirs, self._processes, self._memory), daemon=True
        )
        with _start, _without_main():
            self._server()
            process.start()
        theirs.close()
        return Child(process, ours)

    def _server(self) -> None:
        """See that the fork server runs, with its environment, whether it never did or died."""
        self._context.set_forkserver_preload([_PRELOAD])
        path = os.pathsep.join(entry or os.getcwd() for entry in sys.path)
        with _environment(_PINNED | _FIXED | {registry.VARIABLE: self._processes, "PYTHONPATH": path}):
            forkserver.ensure_running()


@contextmanager
def _without_main() -> Iterator[None]:
    # multiprocessing imports the parent's main module again in every child, unless there is none.
    main = sys.modules["__main__"]
    sys.modules["__main__"] = types.ModuleType("__main__")
    try:
        yield
    finally:
        sys.modules["__main__"] = main


@contextmanager
def _environment(values: dict[str, str]) -> Iterator[None]:
    before = {name: os.environ.get(name) for name in values}
    os.environ.update(values)
    try:
        yield
    finally:
        for name, value in before.items():
            if value is None:
                del os.environ[name]
            else:
                os.environ[name] = value
