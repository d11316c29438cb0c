"""Executes a process: synchronously, or as a job to come back for."""

from fastapi import APIRouter
from starlette.concurrency import run_in_threadpool
from starlette.requests import Request
from starlette.responses import Response

from service.api import links, media, preferences, reader, results, services, status
from service.api.operation import answer, operation, parameter, ref
from service.api.preferences import Preferences
from service.api.problems import HTTPProblemError
from service.api.processes import PROCESS_ID, named
from service.api.services import Services
from service.jobs.failures import STATUSES, problem
from service.jobs.job import Job
from service.processes.base import Process

router = APIRouter()

_HEADERS = {
    "Link": "With `rel=monitor`: the job behind a synchronous answer.",
    "Preference-Applied": "What of `Prefer` was honoured.",
}


@router.post(
    "/processes/{processID}/execution",
    openapi_extra=operation(
        "execute",
        "Processes",
        {
            200: answer(
                "The job ended in time: its result, bare or as a results document.",
                {"anyOf": [ref("result"), ref("results")]},
                headers=_HEADERS,
            ),
            201: answer(
                "The job is under way; its status.",
                ref("statusInfo"),
                headers={
                    "Location": "The job.",
                    "Retry-After": "Seconds after which to ask for its status.",
                    "Preference-Applied": _HEADERS["Preference-Applied"],
                },
            ),
        },
        (404, 410, 413, 415, *STATUSES),
        (
            PROCESS_ID,
            parameter(
                "Prefer",
                "`respond-async`: answer 201 at once. `respond-async, wait=10`: answer 200 if the job ends "
                "within 10 seconds, else 201. Without it the answer is synchronous where the process "
                "allows, up to the operator's limit; then 504, and the job goes on.",
                {"type": "string"},
                where="header",
            ),
        ),
        {
            "required": True,
            "description": 'Inputs bare, as `{"value": …}`, or as a link to a data: URL.',
            "content": {media.JSON_TYPE: {"schema": ref("execute")}},
        },
    ),
)
async def execute(request: Request) -> Response:
    """Execute a process

    Checks the inputs, makes a job of them and answers with its result or with its status. A request that
    has been answered before is answered from the earlier result, which says so in its provenance.
    """
    known = services.of(request)
    process = named(request)
    preferred = preferences.parse(request.headers.getlist("prefer"))
    body = await reader.body(request, known.settings.body_bytes)
    job = await run_in_threadpool(_admit, known, process, body)
    base = services.base(request)
    patience = _patience(process, preferred, known.settings.sync_seconds)
    if patience > 0:
        job = await known.reception.ended(job, patience)
    if _asynchronous(process, preferred):
        if patience > 0 and job.state.terminal:
            applied = {"Preference-Applied": f"respond-async, wait={patience:g}"}
            return await _finished(known, base, job, applied)
        return _created(base, job, preferred, patience)
    if not job.state.terminal:
        raise _still_running(known, base, job)
    return await _finished(known, base, job, {})


def _admit(known: Services, process: Process, body: bytes) -> Job:
    request = known.orders.read(process, body)
    if known.reception.closing:
        raise _going_down()
    return known.reception.submit(request)


def _asynchronous(process: Process, preferred: Preferences) -> bool:
    if "async-execute" not in process.job_control:
        return False
    return preferred.respond_async or "sync-execute" not in process.job_control


def _patience(process: Process, preferred: Preferences, most: float) -> float:
    """Seconds to wait for the job before answering."""
    if not _asynchronous(process, preferred):
        return most
    if "sync-execute" not in process.job_control:
        return 0.0
    return min(float(preferred.wait or 0), most)


def _created(base: str, job: Job, preferred: Preferences, patience: float) -> Response:
    headers = {"Location": links.job_url(base, job.id), "Cache-Control": "no-store"}
    if not job.state.terminal:
        headers["Retry-After"] = str(status.retry_after(job))
    if preferred.respond_async:
        waited = f", wait={patience:g}" if patience > 0 else ""
        headers["Preference-Applied"] = "respond-async" + waited
    return media.json_response(status.document(base, job), 201, headers)


async def _finished(known: Services, base: str, job: Job, headers: dict[str, str]) -> Response:
    monitored = {**headers, "Link": links.monitor(base, job.id)}
    return await run_in_threadpool(results.answer, known.store, job, monitored)


def _still_running(known: Services, base: str, job: Job) -> HTTPProblemError:
    url = links.job_url(base, job.id)
    headers = {"Link": links.monitor(base, job.id), "Retry-After": str(status.retry_after(job))}
    if known.reception.closing:
        document = problem(
            "service-stopping",
            "Service stopping",
            503,
            f"The service goes down. The job {job.id} is kept and goes on when the service is back.",
        )
    else:
        document = problem(
            "synchronous-limit",
            "Synchronous limit reached",
            504,
            f"A synchronous request may wait {known.settings.sync_seconds:g} s. The job {job.id} goes on; "
            "its status is at the address in job. Prefer: respond-async answers at once.",
        )
    return HTTPProblemError({**document, "jobID": job.id, "job": url}, headers)


def _going_down() -> HTTPProblemError:
    document = problem(
        "service-stopping", "Service stopping", 503, "The service goes down and takes no more jobs."
    )
    return HTTPProblemError(document, {"Retry-After": "5"})
