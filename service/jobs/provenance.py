"""Says in a result where it came from: computed for this job, or taken from an earlier one."""

from service.jobs.job import Job
from service.processes.base import JSON


def stated(result: JSON, job: Job) -> JSON:
    """``result`` as the answer to ``job``, its ``provenance`` completed."""
    origin = {
        "problem_digest": job.digest,
        "cached": job.computed_by is not None,
        "computed_by": job.computed_by or job.id,
    }
    return {**result, "provenance": {**result.get("provenance", {}), **origin}}
