"""One log file per job: what the libraries printed, and the traceback of a bug."""

import time
from contextlib import suppress
from pathlib import Path


class Logs:
    """The folder of job logs; files hold whatever the child wrote, and empty ones are removed."""

    def __init__(self, folder: Path, retention: float) -> None:
        folder.mkdir(parents=True, exist_ok=True, mode=0o700)
        self._folder = folder
        self._retention = retention

    def path(self, job_id: str) -> Path:
        """Where the job's child writes."""
        return self._folder / f"{job_id}.log"

    def tidy(self, job_id: str) -> None:
        """Remove the job's log when it says nothing."""
        with suppress(OSError):
            if self.path(job_id).stat().st_size == 0:
                self.path(job_id).unlink()

    def expire(self) -> None:
        """Remove logs older than the retention, in seconds."""
        oldest = time.time() - self._retention
        for file in self._folder.glob("*.log"):
            with suppress(OSError):
                if file.stat().st_mtime < oldest:
                    file.unlink()
