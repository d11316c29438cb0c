"""What the handlers work with, put together once per application."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import cast

from starlette.requests import Request

from service.api.order import Orders
from service.jobs.reception import Reception
from service.jobs.store import Store
from service.processes.base import Process
from service.settings import Settings


@dataclass(frozen=True)
class Services:
    """Settings, processes by id, the jobs, and what reads requests for them."""

    settings: Settings
    processes: Mapping[str, Process]
    store: Store
    reception: Reception
    orders: Orders


def of(request: Request) -> Services:
    """The services of the application that answers ``request``."""
    return cast(Services, request.app.state.services)


def base(request: Request) -> str:
    """Root of every link, without a slash at the end: the operator's public URL, else as requested."""
    public = of(request).settings.public_url
    return str(public or request.base_url).rstrip("/")
