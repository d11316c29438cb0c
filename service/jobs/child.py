"""What runs in the child process: one task, alone, reporting over a pipe, and then the end.

Messages are JSON: ``{"ready"}`` first, then any number of ``{"percent", "message", "partial"}``, and
one of ``{"result"}``, ``{"refused"}``, ``{"memory"}``, ``{"bug"}``.
"""

import ctypes
import json
import multiprocessing.forkserver
import os
import resource
import signal
import sys
import traceback
from multiprocessing.connection import Connection
from pathlib import Path
from typing import Any, NoReturn

from service.errors import ComputationError
from service.jobs import canonical, registry
from service.processes.base import JSON

_PR_SET_PDEATHSIG = 1
_HEADROOM = 2**30


def main(pipe: Connection, processes: str, memory: int) -> NoReturn:
    """Wait for a task on ``pipe``, compute it, send what came of it, and exit.

    processes : where the processes are found, ``module:name``.
    memory : resident bytes the parent allows; address space is bounded well above that.
    """
    _isolate(memory)
    code = 0
    try:
        _send(pipe, {"ready": True})
        task = json.loads(pipe.recv_bytes())
        _log_to(Path(task["log"]))
        _send(pipe, _outcome(pipe, processes, task["process"], task["inputs"]))
    except (EOFError, BrokenPipeError):
        code = 1  # the service is gone
    except BaseException:
        traceback.print_exc()
        code = 2
    finally:
        sys.stdout.flush()
        sys.stderr.flush()
        # Not sys.exit: libraries that hang or crash in their exit handlers must not spoil a finished job.
        os._exit(code)


def _outcome(pipe: Connection, processes: str, process: str, inputs: JSON) -> JSON:
    def report(percent: float, message: str, result_so_far: JSON) -> None:
        _send(pipe, {"percent": float(percent), "message": message, "partial": result_so_far})

    try:
        result = registry.processes(processes)[process].run(inputs, report)
        canonical.text(result)  # NaN, infinities and what is not JSON end here
        return {"result": result}
    except ComputationError as error:
        return {
            "refused": {
                "kind": error.kind,
                "title": error.title,
                "detail": error.detail,
                "status": error.status,
            }
        }
    except MemoryError:
        traceback.print_exc()
        return {"memory": True}
    except BaseException as error:
        traceback.print_exc()
        return {"bug": type(error).__name__}


def _send(pipe: Connection, message: JSON) -> None:
    pipe.send_bytes(canonical.text(message).encode("ascii"))


def _isolate(memory: int) -> None:
    os.setsid()
    _die_with_parent()
    # The fork server lives while any copy of this pipe is open; ours would keep it after the service.
    alive: Any = getattr(multiprocessing.forkserver._forkserver, "_forkserver_alive_fd", None)
    if isinstance(alive, int):
        os.close(alive)
    resource.setrlimit(resource.RLIMIT_CORE, (0, 0))
    bound = _address_space() + memory + _HEADROOM
    hard = resource.getrlimit(resource.RLIMIT_AS)[1]
    bound = bound if hard == resource.RLIM_INFINITY else min(bound, hard)
    resource.setrlimit(resource.RLIMIT_AS, (bound, hard))


def _die_with_parent() -> None:
    if sys.platform == "linux":
        ctypes.CDLL(None).prctl(_PR_SET_PDEATHSIG, signal.SIGKILL)


def _address_space() -> int:
    try:
        pages = int(Path("/proc/self/statm").read_text(encoding="ascii").split()[0])
    except OSError:
        return 0
    return pages * resource.getpagesize()


def _log_to(path: Path) -> None:
    # At the level of file descriptors: compiled libraries write past sys.stdout.
    log = os.open(path, os.O_WRONLY | os.O_CREAT | os.O_APPEND, 0o600)
    os.dup2(log, 1)
    os.dup2(log, 2)
    os.close(log)
