"""Why a job failed: problem documents (RFC 9457) with advice, one per way of failing."""

import signal

from service.errors import ComputationError
from service.processes.base import JSON

PROBLEMS = "urn:wellposed:problem:"
"""What the ``type`` of every problem document of our own begins with."""

STATUSES = (400, 422, 500, 502, 503, 504, 507)
"""HTTP statuses the results of a failed job can have; each is documented."""

INTERNAL = "internal-error"


def problem(kind: str, title: str, status: int, detail: str) -> JSON:
    """A problem document of our own; ``kind`` is the last word of its type."""
    return {"type": PROBLEMS + kind, "title": title, "status": status, "detail": detail}


def refused(error: ComputationError) -> JSON:
    """What the numbers refused, as they said it."""
    status = error.status if error.status in STATUSES else 500
    return problem(error.kind, error.title, status, error.detail)


def time_limit(seconds: float) -> JSON:
    """No enclosure was found within the time the job had, in seconds."""
    return problem(
        "time-limit",
        "Time limit reached",
        504,
        f"The computation was stopped after {seconds:g} s before it had any enclosure. "
        "Raise limits.seconds, ask for a larger tolerance, or simplify the domain.",
    )


def memory_limit(limit: int) -> JSON:
    """The job used more memory than it may, in bytes."""
    return problem(
        "memory-limit",
        "Memory limit reached",
        507,
        f"The computation needed more than the {limit // 2**20} MiB one job may use and was stopped. "
        "Lower limits.unknowns, ask for a larger tolerance, or have the operator raise "
        "WELLPOSED_MEMORY_BYTES.",
    )


def worker_crashed(exitcode: int | None) -> JSON:
    """The process that computed the job died of its own or by someone else's hand."""
    return problem(
        "worker-crashed",
        "Worker crashed",
        500,
        f"The process that computed this job {_manner(exitcode)} before it had a result. Other jobs are "
        "not affected. If the machine was short of memory, lower limits.unknowns; otherwise try once more "
        "and report the problem if it comes back.",
    )


def worker_lost(attempts: int) -> JSON:
    """The service itself died while the job was running, too often."""
    return problem(
        "worker-lost",
        "Worker lost",
        500,
        f"The service was lost {attempts} times while it computed this job, which is not started again. "
        "Submit it once more with lower limits.unknowns, or ask the operator for the log.",
    )


def internal_error(job_id: str) -> JSON:
    """A bug: the log has the traceback, the client gets the number to quote."""
    return problem(
        INTERNAL,
        "Internal error",
        500,
        f"The service made an error in job {job_id}; its log has the particulars. "
        "Report the job's id to the operator.",
    )


def _manner(exitcode: int | None) -> str:
    if exitcode is not None and exitcode < 0:
        try:
            return f"was ended by signal {signal.Signals(-exitcode).name}"
        except ValueError:
            return f"was ended by signal {-exitcode}"
    return "ended unexpectedly"
