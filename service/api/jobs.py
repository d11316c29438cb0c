"""Jobs: their list, their status, their results, and dismissing them."""

from fastapi import APIRouter
from starlette.requests import Request
from starlette.responses import Response

from service.api import media, problems, query, results, services, status
from service.api.links import link
from service.api.operation import answer, operation, parameter, ref
from service.jobs import listing
from service.jobs.failures import STATUSES
from service.jobs.job import Job
from service.jobs.lifecycle import State

router = APIRouter()

_DEFAULT, _MOST = 10, 1000
_NO_STORE = {"Cache-Control": "no-store"}
_STRINGS = {"type": "array", "items": {"type": "string"}}
_JOB_ID = parameter("jobID", "Id of a job.", {"type": "string"}, where="path", required=True)
_OUTPUT_ID = parameter("outputID", "Id of an output.", {"type": "string"}, where="path", required=True)
_SECONDS = {"type": "integer", "minimum": 0}

_FILTERS = (
    parameter("type", "`process`: the one type of job there is.", _STRINGS),
    parameter("processID", "Only jobs of these processes.", _STRINGS),
    parameter(
        "status",
        "Only jobs in these states.",
        {"type": "array", "items": {"type": "string", "enum": [state.value for state in State]}},
    ),
    parameter(
        "datetime",
        "Only jobs created at this instant or in this interval, `a/b`, `../b`, `a/..` (RFC 3339).",
        {"type": "string"},
    ),
    parameter("minDuration", "Only jobs that computed, or compute since, this many seconds.", _SECONDS),
    parameter("maxDuration", "Only jobs that computed, or compute since, no more seconds.", _SECONDS),
    parameter(
        "limit",
        f"Most jobs on a page; more than {_MOST} is read as {_MOST}.",
        {"type": "integer", "minimum": 1, "maximum": _MOST, "default": _DEFAULT},
    ),
    parameter("cursor", "Where the page begins: from a `next` link.", {"type": "string"}),
)
_NAMES = tuple(each["name"] for each in _FILTERS)


@router.get(
    "/jobs",
    openapi_extra=operation(
        "jobList",
        "Jobs",
        {200: answer("A page of the list, newest first.", ref("jobList"))},
        (400, 404, 503),
        _FILTERS,
    ),
)
def job_list(request: Request) -> Response:
    """Jobs

    The jobs that are kept, newest first. Lists may be repeated or separated by commas.
    """
    asked = request.query_params
    base = services.base(request)
    wanted = _query(request)
    found, more = listing.find(services.of(request).store.engine, wanted)
    url = f"{base}/jobs"
    related = [link(f"{url}?{asked}" if asked else url, "self", "This page")]
    if more:
        cursor = query.cursor(found[-1].created, found[-1].id)
        following = [item for item in asked.multi_items() if item[0] != "cursor"]
        related.append(link(f"{url}?{type(asked)([*following, ('cursor', cursor)])}", "next", "Older jobs"))
    documents = [status.document(base, job) for job in found]
    return media.json_response({"jobs": documents, "links": related}, headers=_NO_STORE)


@router.get(
    "/jobs/{jobID}",
    openapi_extra=operation(
        "jobStatus",
        "Jobs",
        {
            200: answer(
                "The status.",
                ref("statusInfo"),
                headers={"Retry-After": "Seconds after which to ask again, while the job has not ended."},
            )
        },
        (404, 503),
        (_JOB_ID,),
    ),
)
def job_status(request: Request) -> Response:
    """Job status

    How far the job is. `partial` has the enclosures found so far: each is valid as it stands.
    """
    job = _named(request)
    headers = dict(_NO_STORE)
    if not job.state.terminal:
        headers["Retry-After"] = str(status.retry_after(job))
    return media.json_response(status.document(services.base(request), job), headers=headers)


@router.delete(
    "/jobs/{jobID}",
    openapi_extra=operation(
        "dismiss",
        "Jobs",
        {200: answer("The job is dismissed; its status.", ref("statusInfo"))},
        (404, 410, 503),
        (_JOB_ID,),
    ),
)
def dismiss(request: Request) -> Response:
    """Dismiss a job

    Stops a job that has not ended; the enclosures found so far stay in its status. Removes the results of
    one that has.
    """
    job = services.of(request).reception.dismiss(request.path_params["jobID"])
    if job is None:
        _named(request)
        raise problems.job_dismissed()
    return media.json_response(status.document(services.base(request), job), headers=_NO_STORE)


@router.get(
    "/jobs/{jobID}/results",
    openapi_extra=operation(
        "results",
        "Jobs",
        {
            200: answer(
                "The results in the form the execution request asked for.",
                {"anyOf": [ref("result"), ref("results")]},
            )
        },
        (404, 410, *STATUSES),
        (_JOB_ID,),
    ),
)
def job_results(request: Request) -> Response:
    """Results of a job

    Of a failed job: why it failed, with a fitting HTTP status.
    """
    return results.answer(services.of(request).store, _named(request), {})


@router.get(
    "/jobs/{jobID}/results/{outputID}",
    openapi_extra=operation(
        "output",
        "Jobs",
        {200: answer("The output, bare.", ref("result"))},
        (404, 410, *STATUSES),
        (_JOB_ID, _OUTPUT_ID),
    ),
)
def job_output(request: Request) -> Response:
    """One output of a job

    The bare output, whatever form the execution request asked for.
    """
    return results.one(services.of(request).store, _named(request), request.path_params["outputID"])


def _named(request: Request) -> Job:
    job = services.of(request).store.find(request.path_params["jobID"])
    if job is None:
        raise problems.no_such_job()
    return job


def _query(request: Request) -> listing.Query:
    asked = request.query_params
    known = services.of(request)
    query.only(asked, _NAMES)
    query.several(asked, "type", ("process",))
    processes = query.several(asked, "processID")
    for process in processes:
        if process not in known.processes and not listing.knows(known.store.engine, process):
            raise problems.no_such_process()
    shortest, longest = query.seconds(asked, "minDuration"), query.seconds(asked, "maxDuration")
    place = query.place(asked, (float, str))
    return listing.Query(
        processes=processes,
        states=tuple(State(name) for name in query.several(asked, "status", list(State))),
        created=query.interval(asked, "datetime"),
        shortest=shortest,
        longest=longest,
        after=None if place is None else (place[0], place[1]),
        limit=query.limit(asked, _DEFAULT, _MOST),
    )
