"""Errors as problem documents (RFC 9457): never the input, never a stack trace."""

import logging
from collections.abc import Mapping
from typing import Any

from fastapi import FastAPI
from sqlalchemy.exc import SQLAlchemyError
from starlette.exceptions import HTTPException
from starlette.requests import ClientDisconnect, Request
from starlette.responses import Response
from starlette.routing import Match

from service.api import media
from service.errors import Fault, ProblemError
from service.jobs.failures import INTERNAL, problem
from service.jobs.job import Job
from service.processes.base import JSON

logger = logging.getLogger("wellposed.api")

_OGC = "http://www.opengis.net/def/exceptions/ogcapi-processes-1/1.0/"
_MOST_FAULTS = 100
_LONGEST_POINTER = 400


class HTTPProblemError(Exception):
    """Raised anywhere in the edge to answer with a problem document."""

    def __init__(self, document: JSON, headers: Mapping[str, str] | None = None) -> None:
        super().__init__(document["detail"])
        self.document = document
        self.headers = dict(headers or {})


def no_such_process() -> HTTPProblemError:
    """404: the process is not offered."""
    return _ogc("no-such-process", "No such process", "No process has this id; /processes lists them.")


def no_such_job() -> HTTPProblemError:
    """404: the job is not kept, or never was."""
    return _ogc(
        "no-such-job", "No such job", "No job has this id; jobs are deleted some time after they end."
    )


def result_not_ready(job: Job, retry_after: int) -> HTTPProblemError:
    """404: the job has not ended yet."""
    return _ogc(
        "result-not-ready",
        "Result not ready",
        f"The job is {job.state} ({job.progress} %); its status has the enclosures found so far.",
        {"Retry-After": str(retry_after)},
    )


def no_such_output() -> HTTPProblemError:
    """404: the process has no output of that id, or the request did not ask for it."""
    return HTTPProblemError(
        problem("no-such-output", "No such output", 404, "This job has no output of this id.")
    )


def job_dismissed() -> HTTPProblemError:
    """410: the job was dismissed."""
    return HTTPProblemError(
        problem(
            "job-dismissed",
            "Job dismissed",
            410,
            "The job was dismissed and has no results; enclosures found before are in its status.",
        )
    )


def invalid_request(*faults: Fault) -> HTTPProblemError:
    """400: what is wrong with the request, place by place."""
    count = len(faults)
    document = problem(
        "invalid-request",
        "Invalid request",
        400,
        "The request has 1 fault; see errors."
        if count == 1
        else f"The request has {count} faults; see errors.",
    )
    document["errors"] = [
        {"pointer": _bounded(fault.pointer), "detail": fault.detail} for fault in faults[:_MOST_FAULTS]
    ]
    return HTTPProblemError(document)


def invalid_parameter(name: str, detail: str) -> HTTPProblemError:
    """400: a query parameter that cannot be used; ``name`` is one of ours."""
    return HTTPProblemError(
        problem("invalid-query-parameter", "Invalid query parameter", 400, f"Parameter {name}: {detail}.")
    )


def unknown_parameter(known: tuple[str, ...]) -> HTTPProblemError:
    """400: a query parameter that does not exist here."""
    return HTTPProblemError(
        problem(
            "unknown-query-parameter",
            "Unknown query parameter",
            400,
            f"A query parameter is not known here; known are {', '.join(known)}.",
        )
    )


def respond(request: Request, document: JSON, headers: Mapping[str, str] | None = None) -> Response:
    """The problem document in the media type the client takes."""
    media_type = media.error_type(request.headers.getlist("accept"))
    merged = {"Cache-Control": "no-store", **(headers or {})}
    return media.json_response(document, document["status"], merged, media_type)


def install(app: FastAPI) -> None:
    """Answer every error of ``app`` with a problem document."""
    for kind, handler in (
        (HTTPProblemError, _on_problem),
        (ProblemError, _on_faults),
        (HTTPException, _on_http),
        (SQLAlchemyError, _on_store),
        (ClientDisconnect, _on_disconnect),
        (Exception, _on_bug),
    ):
        app.add_exception_handler(kind, handler)


async def _on_problem(request: Request, error: Any) -> Response:
    return respond(request, error.document, error.headers)


async def _on_faults(request: Request, error: Any) -> Response:
    return respond(request, invalid_request(*error.faults).document)


async def _on_http(request: Request, error: Any) -> Response:
    if error.status_code == 404:
        return respond(request, problem("not-found", "Not found", 404, "Nothing is found at this path."))
    if error.status_code == 405:
        allow = ", ".join(_methods(request))
        detail = f"This path answers {allow}."
        return respond(
            request, problem("method-not-allowed", "Method not allowed", 405, detail), {"Allow": allow}
        )
    return respond(request, problem("http-error", "HTTP error", error.status_code, str(error.detail)))


async def _on_store(request: Request, error: Any) -> Response:
    logger.error("the job store did not answer", exc_info=error)
    document = problem(
        "store-unavailable", "Job store unavailable", 503, "The job store does not answer; try again soon."
    )
    return respond(request, document, {"Retry-After": "5"})


async def _on_disconnect(request: Request, _error: Any) -> Response:
    return respond(request, invalid_request(Fault("", "the body ended early")).document)


async def _on_bug(request: Request, _error: Any) -> Response:
    # The server writes the traceback to its log.
    detail = "The service made an error; its log has the particulars."
    return respond(request, problem(INTERNAL, "Internal error", 500, detail))


def _methods(request: Request) -> list[str]:
    methods: set[str] = set()
    for route in request.app.routes:
        if route.matches(request.scope)[0] is not Match.NONE:
            methods |= route.methods or set()
    if "GET" in methods:
        methods.add("HEAD")
    return sorted(methods)


def _ogc(kind: str, title: str, detail: str, headers: Mapping[str, str] | None = None) -> HTTPProblemError:
    return HTTPProblemError({"type": _OGC + kind, "title": title, "status": 404, "detail": detail}, headers)


def _bounded(pointer: str) -> str:
    """A pointer whose member names a client made long is cut to its beginning."""
    while len(pointer) > _LONGEST_POINTER:
        pointer = pointer.rpartition("/")[0]
    return pointer
