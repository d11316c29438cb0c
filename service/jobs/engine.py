"""Dispatch: what the rest of the service asks of whatever gets jobs computed."""

from typing import Protocol


class Engine(Protocol):
    """Takes jobs from the store and sees that they end; the store stays the truth."""

    def start(self) -> None:
        """Begin to take jobs; those of a service that died are taken over."""

    def stop(self) -> None:
        """Stop computing; what ran waits in the store for the next start."""

    def wake(self) -> None:
        """A job has been submitted."""

    def cancel(self, job_id: str) -> None:
        """The job has been dismissed: stop its computation now."""

    def ready(self) -> bool:
        """Whether a job submitted now would be started."""
