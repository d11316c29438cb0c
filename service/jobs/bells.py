"""Wakes the requests that wait for a job, from whatever thread the news comes."""

import asyncio
import threading
from collections import defaultdict
from collections.abc import Iterator
from contextlib import contextmanager, suppress


class Bells:
    """One bell per job, rung when the job ends."""

    def __init__(self) -> None:
        self._lock = threading.Lock()
        self._listeners: dict[str, set[asyncio.Event]] = defaultdict(set)
        self._loop: asyncio.AbstractEventLoop | None = None

    @contextmanager
    def listen(self, job_id: str) -> Iterator[asyncio.Event]:
        """An event set at every ring; call from the event loop that waits for it."""
        event = asyncio.Event()
        with self._lock:
            self._loop = asyncio.get_running_loop()
            self._listeners[job_id].add(event)
        try:
            yield event
        finally:
            with self._lock:
                self._listeners[job_id].discard(event)
                if not self._listeners[job_id]:
                    del self._listeners[job_id]

    def ring(self, job_id: str) -> None:
        """Wake those who listen for the job."""
        with self._lock:
            self._set(self._listeners.get(job_id, set()))

    def ring_all(self) -> None:
        """Wake everyone."""
        with self._lock:
            for events in self._listeners.values():
                self._set(events)

    def _set(self, events: set[asyncio.Event]) -> None:
        for event in events:
            if self._loop is not None:
                with suppress(RuntimeError):  # the loop has closed, and nobody waits any more
                    self._loop.call_soon_threadsafe(event.set)
