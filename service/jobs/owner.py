"""Who runs a job: a name for this service process by which others see whether it still lives."""

import os
import platform
import uuid
from contextlib import suppress
from pathlib import Path

import psutil

_SEPARATOR = "|"


def identity() -> str:
    """A name no other service process has: machine, process and a random part."""
    me = psutil.Process()
    return _SEPARATOR.join([_machine(), str(me.pid), f"{me.create_time():.2f}", uuid.uuid4().hex])


def certainly_dead(owner: str) -> bool:
    """Whether ``owner`` was a process of this very machine that exists no more.

    False when it lives, and when it belongs to another machine or container and cannot be seen.
    """
    machine, pid, born, _ = owner.rsplit(_SEPARATOR, 3)
    if machine != _machine():
        return False
    try:
        process = psutil.Process(int(pid))
        return f"{process.create_time():.2f}" != born or process.status() == psutil.STATUS_ZOMBIE
    except psutil.NoSuchProcess:
        return True
    except psutil.Error:
        return False


def _machine() -> str:
    # Containers can share a host name, and process numbers mean something in one namespace only.
    parts = [platform.node()]
    with suppress(OSError):
        parts.append(Path("/proc/sys/kernel/random/boot_id").read_text(encoding="ascii").strip())
    with suppress(OSError):
        parts.append(str(os.stat("/proc/self/ns/pid").st_ino))
    return _SEPARATOR.join(parts)
