"""A job's status document, and how soon to ask for it again."""

import time
from datetime import UTC, datetime

from service.api import links
from service.jobs.job import Job
from service.processes.base import JSON

_PACE = ((5.0, 1), (30.0, 2), (120.0, 5))
_SLOWEST = 10


def document(base: str, job: Job) -> JSON:
    """``statusInfo`` of the standard, with the members its next version has and ``partial`` of ours."""
    status: JSON = {
        "jobID": job.id,
        "id": job.id,
        "type": "process",
        "processingEntityType": "ogc-api-processes",
        "processID": job.process,
        "status": job.state.value,
        "message": job.message,
        "progress": job.progress,
    }
    for name in ("created", "started", "finished", "updated", "expires"):
        instant = getattr(job, name)
        if instant is not None:
            status[name] = _rfc3339(instant)
    if job.partial is not None:
        status["partial"] = job.partial
    if job.failure is not None:
        status["exception"] = job.failure
    status["links"] = links.of_job(base, job)
    return status


def retry_after(job: Job) -> int:
    """Seconds after which it is worth asking again: soon for a young job, seldom for an old one."""
    age = time.time() - job.created
    return next((pause for limit, pause in _PACE if age < limit), _SLOWEST)


def _rfc3339(instant: float) -> str:
    return datetime.fromtimestamp(instant, UTC).isoformat(timespec="milliseconds").replace("+00:00", "Z")
