"""Is the service alive, and would a job submitted now be computed?"""

from fastapi import APIRouter
from sqlalchemy.exc import SQLAlchemyError
from starlette.requests import Request
from starlette.responses import Response

from service.api import media, services
from service.api.operation import answer, operation, ref

router = APIRouter()


@router.get(
    "/livez",
    openapi_extra=operation("alive", "Service", {200: answer("It is.", ref("health"))}),
)
async def livez(request: Request) -> Response:
    """Alive?

    Whether the service answers at all; nothing else is looked at.
    """
    return media.json_response({"status": "ok"}, headers={"Cache-Control": "no-store"})


@router.get(
    "/readyz",
    openapi_extra=operation(
        "ready",
        "Service",
        {200: answer("It is.", ref("health")), 503: answer("Not now.", ref("health"))},
    ),
)
def readyz(request: Request) -> Response:
    """Ready?

    Whether the job store answers and a worker stands ready.
    """
    known = services.of(request)
    ready = known.reception.open
    try:
        known.store.ping()
    except SQLAlchemyError:
        ready = False
    document = {"status": "ok" if ready else "not ready"}
    return media.json_response(document, 200 if ready else 503, {"Cache-Control": "no-store"})
