"""Finds the processes that can be executed, by the name of the module that lists them."""

import importlib
from collections.abc import Callable, Mapping
from typing import Any

from service.processes.base import Process

VARIABLE = "WELLPOSED_PROCESSES"
"""Environment variable by which the fork server learns the name."""


def processes(name: str) -> Mapping[str, Process]:
    """The processes by id, from ``module:attribute``.

    Raises ImportError when the module, and AttributeError when the attribute is not there.
    """
    module, _, attribute = name.partition(":")
    found: Mapping[str, Process] = getattr(importlib.import_module(module), attribute)
    return found


def warm(name: str) -> None:
    """Call ``warm()`` of the module that lists the processes, if it has one."""
    module: Any = importlib.import_module(name.partition(":")[0])
    action: Callable[[], object] | None = getattr(module, "warm", None)
    if action is not None:
        action()
