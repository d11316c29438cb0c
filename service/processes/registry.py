"""The processes of the service."""

from service.processes.base import Process
from service.processes.constants import CONSTANTS_PROCESS, warm

__all__ = ["PROCESSES", "warm"]

PROCESSES: dict[str, Process] = {process.id: process for process in (CONSTANTS_PROCESS,)}
