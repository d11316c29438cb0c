"""Serves the API definition in both versions, and the page to read."""

from fastapi import APIRouter
from starlette.requests import Request
from starlette.responses import HTMLResponse, Response

from service.api import media, openapi, services
from service.api.docs import page
from service.api.landing import DEFINITION_TYPE
from service.api.openapi30 import downgrade
from service.api.operation import answer, operation
from service.demo.examples import DEMO, examples, texts
from service.processes.base import JSON

router = APIRouter()


@router.get(
    "/api",
    openapi_extra=operation(
        "definition", "Service", {200: answer("OpenAPI 3.0.3.", {"type": "object"}, DEFINITION_TYPE)}
    ),
)
def definition_30(request: Request) -> Response:
    """API definition, OpenAPI 3.0"""
    return media.json_response(downgrade(_document(request)), media_type=DEFINITION_TYPE)


@router.get(
    "/openapi.json",
    openapi_extra=operation("definition31", "Service", {200: answer("OpenAPI 3.1.", {"type": "object"})}),
)
def definition_31(request: Request) -> Response:
    """API definition, OpenAPI 3.1"""
    return media.json_response(_document(request))


@router.get(
    "/docs",
    openapi_extra=operation(
        "documentation", "Service", {200: answer("A page to read.", {"type": "string"}, "text/html")}
    ),
)
def documentation(request: Request) -> Response:
    """Documentation

    This page; nothing on it comes from elsewhere.
    """
    headers = {"Content-Security-Policy": "default-src 'none'; style-src 'unsafe-inline'"}
    known = services.of(request).processes
    return HTMLResponse(page(_document(request), known, texts()[DEMO]), headers=headers)


def _document(request: Request) -> JSON:
    base = services.base(request)
    return openapi.document(request.app.routes, services.of(request).processes, examples(), base)
