"""Links and the relations they have in OGC API – Processes."""

from service.api.media import JSON_TYPE, PROBLEM_TYPE
from service.jobs.job import Job
from service.jobs.lifecycle import State
from service.processes.base import JSON

_REL = "http://www.opengis.net/def/rel/ogc/1.0/"
CONFORMANCE = _REL + "conformance"
PROCESSES = _REL + "processes"
JOB_LIST = _REL + "job-list"
EXECUTE = _REL + "execute"
RESULTS = _REL + "results"
EXCEPTIONS = _REL + "exceptions"


def link(href: str, rel: str, title: str | None = None, media_type: str = JSON_TYPE) -> JSON:
    """One link object."""
    stated = {"href": href, "rel": rel, "type": media_type}
    return stated if title is None else {**stated, "title": title}


def job_url(base: str, job_id: str) -> str:
    """Where a job is."""
    return f"{base}/jobs/{job_id}"


def monitor(base: str, job_id: str) -> str:
    """Value of the Link header that ties a synchronous answer to its job."""
    return f"<{job_url(base, job_id)}>; rel=monitor"


def of_job(base: str, job: Job) -> list[JSON]:
    """Links of a job's status."""
    url = job_url(base, job.id)
    links = [
        link(url, "self", "This job"),
        link(url, "status", "Status of this job"),
        link(f"{base}/jobs", "up", "All jobs"),
    ]
    if job.state is State.SUCCESSFUL:
        links.append(link(f"{url}/results", RESULTS, "Results"))
    if job.state is State.FAILED:
        links.append(link(f"{url}/results", EXCEPTIONS, "Why the job failed", PROBLEM_TYPE))
    return links
