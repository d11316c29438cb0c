"""What a job came to, as the answer to whoever waits for it or comes back later."""

import json
from collections.abc import Mapping

from starlette.responses import Response

from service.api import media, problems, status
from service.api.problems import HTTPProblemError
from service.jobs import provenance
from service.jobs.job import Job
from service.jobs.lifecycle import State
from service.jobs.store import Store
from service.processes.base import JSON


def answer(store: Store, job: Job, headers: Mapping[str, str]) -> Response:
    """The results in the form the job's request asked for.

    Raises HTTPProblemError when the job has none: not yet, failed, or dismissed.
    """
    outputs = _outputs(store, job, headers)
    if job.response == "document":
        wrapped = {name: {"value": value} for name, value in outputs.items()}
        return media.json_response(wrapped, headers=_uncached(headers))
    # Every process has one output, so a raw response needs no multipart body.
    (bare,) = outputs.values()
    return media.json_response(bare, headers=_uncached(headers))


def one(store: Store, job: Job, output: str) -> Response:
    """One output, bare; raises HTTPProblemError as `answer` does, and when there is no such output."""
    outputs = _outputs(store, job, {})
    if output not in outputs:
        raise problems.no_such_output()
    return media.json_response(outputs[output], headers=_uncached({}))


def _outputs(store: Store, job: Job, headers: Mapping[str, str]) -> dict[str, JSON]:
    if not job.state.terminal:
        raise problems.result_not_ready(job, status.retry_after(job))
    if job.state is State.FAILED and job.failure is not None:
        raise HTTPProblemError({**job.failure, "instance": f"/jobs/{job.id}"}, headers)
    text = store.result(job.id) if job.state is State.SUCCESSFUL else None
    if text is None:
        # Dismissed, or dismissed since the status was read.
        raise problems.job_dismissed()
    (output,) = job.outputs
    return {output: provenance.stated(json.loads(text), job)}


def _uncached(headers: Mapping[str, str]) -> dict[str, str]:
    return {"Cache-Control": "no-store", **headers}
