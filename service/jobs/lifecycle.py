"""A job's life as a state machine: five states, and the moves between them that exist.

::

    submit ──► accepted ──claim──► running ──succeed──► successful ──┐
    answer ──────────────────────────────────────────►  (from cache) ├─purge──► dismissed
                   │                 │ ├────fail─────► failed ───────┘             ▲
                   │                 │ └──abandon────► failed                      │
                   └─────dismiss─────┴─────────────────────────────────────────────┘

``claim`` also takes a running job whose owner let its lease lapse: the job stays running and its
attempt number grows. ``abandon`` is for a job whose owners died too often. ``dismiss`` keeps the
enclosures found so far, ``purge`` leaves a tombstone. Rows are deleted when they expire.

Every change of state in the store is one SQL statement guarded by the ``sources`` of its move, so
whoever commits first wins and the other side sees that nothing was changed.
"""

from dataclasses import dataclass
from enum import StrEnum


class State(StrEnum):
    """The states of a job, by their names in OGC API – Processes."""

    ACCEPTED = "accepted"
    RUNNING = "running"
    SUCCESSFUL = "successful"
    FAILED = "failed"
    DISMISSED = "dismissed"

    @property
    def terminal(self) -> bool:
        """Whether no computation can change the job any more."""
        return self not in (State.ACCEPTED, State.RUNNING)


@dataclass(frozen=True)
class Move:
    """A change of state: where it may start and where it ends."""

    sources: frozenset[State]
    target: State


CLAIM = Move(frozenset({State.ACCEPTED, State.RUNNING}), State.RUNNING)
SUCCEED = Move(frozenset({State.RUNNING}), State.SUCCESSFUL)
FAIL = Move(frozenset({State.RUNNING}), State.FAILED)
ABANDON = Move(frozenset({State.RUNNING}), State.FAILED)
DISMISS = Move(frozenset({State.ACCEPTED, State.RUNNING}), State.DISMISSED)
PURGE = Move(frozenset({State.SUCCESSFUL, State.FAILED}), State.DISMISSED)

MOVES = {
    "claim": CLAIM,
    "succeed": SUCCEED,
    "fail": FAIL,
    "abandon": ABANDON,
    "dismiss": DISMISS,
    "purge": PURGE,
}


def progress_while_running(percent: float, before: int) -> int:
    """Whole per cent to show for a reported ``percent``: never below ``before``, 100 only on success."""
    return max(before, min(99, int(max(0.0, percent))))
