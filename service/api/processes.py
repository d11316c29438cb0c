"""What can be computed: the list of processes, and the description of each."""

from urllib.parse import quote

from fastapi import APIRouter
from starlette.requests import Request
from starlette.responses import Response

from service.api import links, media, query, services
from service.api.links import link
from service.api.operation import answer, operation, parameter, ref
from service.api.problems import no_such_process
from service.processes.base import JSON, Process

router = APIRouter()

_DEFAULT, _MOST = 10, 1000

PROCESS_ID = parameter("processID", "Id of a process.", {"type": "string"}, where="path", required=True)


@router.get(
    "/processes",
    openapi_extra=operation(
        "processes",
        "Processes",
        {200: answer("A page of the list.", ref("processList"))},
        (400,),
        (
            parameter(
                "limit",
                f"Most processes on a page; more than {_MOST} is read as {_MOST}.",
                {"type": "integer", "minimum": 1, "maximum": _MOST, "default": _DEFAULT},
            ),
            parameter("cursor", "Where the page begins: from a `next` link.", {"type": "string"}),
        ),
    ),
)
def process_list(request: Request) -> Response:
    """Processes

    What can be computed.
    """
    base = services.base(request)
    limit = query.limit(request.query_params, _DEFAULT, _MOST)
    start = (query.place(request.query_params, (int,)) or (0,))[0]
    offered = list(services.of(request).processes.values())
    page, following = offered[start : start + limit], start + limit
    related = [link(_self_url(request, base), "self", "This page")]
    if following < len(offered):
        url = f"{base}/processes?limit={limit}&cursor={query.cursor(following)}"
        related.append(link(url, "next", "More processes"))
    return media.json_response({"processes": [_summary(base, process) for process in page], "links": related})


@router.get(
    "/processes/{processID}",
    openapi_extra=operation(
        "processDescription",
        "Processes",
        {200: answer("The description.", ref("process"))},
        (404,),
        (PROCESS_ID,),
    ),
)
def process_description(request: Request) -> Response:
    """Process description

    The inputs and outputs of one process, with their schemas.
    """
    process = named(request)
    described = _summary(services.base(request), process)
    return media.json_response(
        {
            **described,
            "inputs": process.inputs,
            "outputs": process.outputs,
            "links": described["links"],
        }
    )


def named(request: Request) -> Process:
    """The process the path names; raises HTTPProblemError (404) when there is none."""
    process = services.of(request).processes.get(request.path_params["processID"])
    if process is None:
        raise no_such_process()
    return process


def _summary(base: str, process: Process) -> JSON:
    url = f"{base}/processes/{process.id}"
    return {
        "id": process.id,
        "title": process.title,
        "description": process.description,
        "version": process.version,
        "keywords": list(process.keywords),
        "jobControlOptions": list(process.job_control),
        "outputTransmission": ["value"],
        "links": [
            link(url, "self", "Description"),
            link(f"{url}/execution", links.EXECUTE, "Execute"),
        ],
    }


def _self_url(request: Request, base: str) -> str:
    asked = request.url.query
    return f"{base}/processes" + (f"?{quote(asked, safe='=&%+,.~-_:/')}" if asked else "")
