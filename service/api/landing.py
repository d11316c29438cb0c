"""The landing page, and the conformance classes that are kept."""

from fastapi import APIRouter
from starlette.requests import Request
from starlette.responses import Response

from service.api import links, media, services
from service.api.links import link
from service.api.operation import answer, operation, ref

router = APIRouter()

DEFINITION_TYPE = "application/vnd.oai.openapi+json;version=3.0"

_PROCESSES_1 = "http://www.opengis.net/spec/ogcapi-processes-1/1.0/conf/"
_COMMON_1 = "http://www.opengis.net/spec/ogcapi-common-1/1.0/conf/"

CONFORMANCE_CLASSES = [
    *(
        _PROCESSES_1 + name
        for name in ("core", "json", "oas30", "ogc-process-description", "job-list", "dismiss")
    ),
    *(_COMMON_1 + name for name in ("core", "landing-page", "json", "oas30")),
]


@router.get(
    "/",
    openapi_extra=operation("landingPage", "Service", {200: answer("Where things are.", ref("landingPage"))}),
)
def landing_page(request: Request) -> Response:
    """Landing page

    Links to everything the service has.
    """
    base = services.base(request)
    return media.json_response(
        {
            "title": "Wellposed",
            "description": "Guaranteed two-sided enclosures of the constants on which the well-posedness of "
            "a simulation rests, on a domain of yours.",
            "links": [
                link(f"{base}/", "self", "This page"),
                link(f"{base}/api", "service-desc", "API definition, OpenAPI 3.0", DEFINITION_TYPE),
                link(
                    f"{base}/openapi.json",
                    "service-desc",
                    "API definition, OpenAPI 3.1",
                    "application/vnd.oai.openapi+json;version=3.1",
                ),
                link(f"{base}/docs", "service-doc", "Documentation to read", "text/html"),
                link(f"{base}/conformance", links.CONFORMANCE, "Conformance classes"),
                link(f"{base}/processes", links.PROCESSES, "What can be computed"),
                link(f"{base}/jobs", links.JOB_LIST, "Jobs"),
            ],
        }
    )


@router.get(
    "/conformance",
    openapi_extra=operation("conformance", "Service", {200: answer("The classes.", ref("confClasses"))}),
)
def conformance(request: Request) -> Response:
    """Conformance classes

    The parts of OGC API – Processes and OGC API – Common that the service keeps to.
    """
    return media.json_response({"conformsTo": CONFORMANCE_CLASSES})
