"""The application: routes, errors and edge around the jobs, from settings."""

from collections.abc import AsyncIterator
from contextlib import asynccontextmanager

from fastapi import FastAPI
from starlette.middleware.cors import CORSMiddleware

from service import __version__
from service.api import definition, execution, health, jobs, landing, problems, processes
from service.api.edge import Edge
from service.api.order import Orders
from service.api.services import Services
from service.jobs import registry, tables
from service.jobs.bells import Bells
from service.jobs.logs import Logs
from service.jobs.nursery import Nursery
from service.jobs.reception import Reception
from service.jobs.store import Store
from service.jobs.supervisors import Supervisors, Terms
from service.settings import Settings

_ROUTERS = (landing, definition, processes, execution, jobs, health)
_HOUR = 3600.0


def create_app(settings: Settings | None = None) -> FastAPI:
    """The service as an ASGI application; jobs are taken from the moment it starts up.

    Raises ImportError when the processes named in the settings cannot be loaded.
    """
    chosen = settings or Settings()
    known = registry.processes(chosen.processes)

    @asynccontextmanager
    async def lifespan(app: FastAPI) -> AsyncIterator[None]:
        retention = chosen.retention_hours * _HOUR
        chosen.state.mkdir(parents=True, exist_ok=True, mode=0o700)
        store = Store(tables.connect(chosen.database), retention)
        bells = Bells()
        supervisors = Supervisors(
            store,
            known,
            Nursery(chosen.processes, chosen.memory_bytes),
            bells,
            Logs(chosen.state / "logs", retention),
            _terms(chosen),
        )
        reception = Reception(store, supervisors, bells)
        app.state.services = Services(chosen, known, store, reception, Orders())
        supervisors.start()
        try:
            yield
        finally:
            reception.close()
            supervisors.stop()
            store.close()

    app = FastAPI(
        title="Wellposed",
        version=__version__,
        lifespan=lifespan,
        openapi_url=None,
        docs_url=None,
        redoc_url=None,
        redirect_slashes=False,
    )
    for module in _ROUTERS:
        # Flat, not as routers inside: the API definition and the Allow header read this list.
        app.routes.extend(module.router.routes)
    problems.install(app)
    app.add_middleware(Edge)
    app.add_middleware(
        CORSMiddleware,
        allow_origins=list(chosen.cors_origins),
        allow_methods=["GET", "HEAD", "POST", "DELETE"],
        allow_headers=["Content-Type", "Prefer"],
        expose_headers=["Location", "Retry-After", "Preference-Applied", "Link"],
    )
    return app


def _terms(settings: Settings) -> Terms:
    return Terms(
        workers=settings.workers,
        wall=settings.wall_seconds,
        grace=settings.grace_seconds,
        memory=settings.memory_bytes,
        lease=settings.lease_seconds,
        attempts=settings.attempts,
    )
