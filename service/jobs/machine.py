"""What this machine grants the service: cores and memory, container quotas included."""

import math
import os
from collections.abc import Iterator
from pathlib import Path

_CGROUP = Path("/sys/fs/cgroup")


def cores() -> int:
    """Number of cores this process may use, at least 1: affinity mask and cgroup quotas, the smallest."""
    allowed = len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1
    return max(1, math.floor(min([float(allowed), *_cpu_quotas()])))


def memory() -> int:
    """Bytes of memory this process may use: physical memory or cgroup limits, the smallest."""
    physical = os.sysconf("SC_PAGE_SIZE") * os.sysconf("SC_PHYS_PAGES")
    return min([physical, *_memory_limits()])


def _cpu_quotas() -> Iterator[float]:
    for folder in _groups():
        quota, _, period = _read(folder / "cpu.max").partition(" ")
        if quota.isdigit() and period.isdigit():
            yield int(quota) / int(period)
    quota, period = (_read(_CGROUP / "cpu" / f"cpu.cfs_{name}_us") for name in ("quota", "period"))
    if quota.isdigit() and period.isdigit():
        yield int(quota) / int(period)


def _memory_limits() -> Iterator[int]:
    files = [folder / "memory.max" for folder in _groups()]
    for file in [*files, _CGROUP / "memory" / "memory.limit_in_bytes"]:
        if (text := _read(file)).isdigit():
            yield int(text)


def _groups() -> Iterator[Path]:
    """This process's control group (version 2) and those that contain it."""
    for line in _read(Path("/proc/self/cgroup")).splitlines():
        if line.startswith("0::"):
            group = _CGROUP / line[3:].lstrip("/")
            yield group
            yield from (folder for folder in group.parents if folder.is_relative_to(_CGROUP))


def _read(path: Path) -> str:
    try:
        return path.read_text(encoding="ascii").strip()
    except (OSError, UnicodeDecodeError):
        return ""
