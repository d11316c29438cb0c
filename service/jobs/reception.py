"""Where jobs are handed in, waited for and dismissed: the API's one door to the jobs."""

import asyncio
import time

from service.jobs.bells import Bells
from service.jobs.engine import Engine
from service.jobs.job import Job, Request
from service.jobs.store import Store

# News of jobs that another replica computes come through the store alone.
_LOOK_AGAIN = 1.0


class Reception:
    """Accepts requests that have been checked."""

    def __init__(self, store: Store, engine: Engine, bells: Bells) -> None:
        self._store = store
        self._engine = engine
        self._bells = bells
        self.closing = False

    @property
    def open(self) -> bool:
        """Whether jobs are accepted and will be started."""
        return not self.closing and self._engine.ready()

    def submit(self, request: Request) -> Job:
        """A new job; successful at once when the same request has been answered before."""
        job = self._store.submit(request)
        if not job.state.terminal:
            self._engine.wake()
        return job

    def dismiss(self, job_id: str) -> Job | None:
        """Stop or remove the job; None when it is not there or is dismissed already."""
        job = self._store.dismiss(job_id)
        if job is not None:
            self._engine.cancel(job_id)
            self._bells.ring(job_id)
        return job

    async def ended(self, job: Job, seconds: float) -> Job:
        """The job once it has ended, or as it is after ``seconds`` or when the service goes down."""
        deadline = time.monotonic() + seconds
        with self._bells.listen(job.id) as bell:
            while not job.state.terminal:
                found = await asyncio.to_thread(self._store.find, job.id)
                job = found or job
                remaining = deadline - time.monotonic()
                if job.state.terminal or remaining <= 0 or self.closing:
                    break
                try:
                    await asyncio.wait_for(bell.wait(), min(remaining, _LOOK_AGAIN))
                except TimeoutError:
                    continue
                bell.clear()
        return job

    def close(self) -> None:
        """Let everyone go who waits; jobs go on in the store."""
        self.closing = True
        self._bells.ring_all()
