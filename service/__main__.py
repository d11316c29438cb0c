"""Command line: ``python -m service serve | demo | openapi``."""

import argparse
import copy
import importlib
import socket
import sys
from collections.abc import Sequence
from contextlib import suppress
from pathlib import Path

import uvicorn
from fastapi import FastAPI
from pydantic import ValidationError
from sqlalchemy.exc import SQLAlchemyError
from uvicorn.config import LOGGING_CONFIG

_PACKAGES = (
    "libgl1 libglu1-mesa libglvnd0 libx11-6 libxext6 libxrender1 libxcursor1 libxfixes3 libxft2 libxinerama1 "
    "libfontconfig1 libgomp1"
)
_DRAIN = 3
_BACKLOG = 2048


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command; returns the exit code."""
    parser = argparse.ArgumentParser(prog="python -m service", description=__doc__)
    commands = parser.add_subparsers(dest="command", required=True)
    serve = commands.add_parser("serve", help="run the service")
    serve.add_argument("--host", default="127.0.0.1", help="address to listen at (default: this machine)")
    serve.add_argument("--port", type=int, default=8000, help="port; 0 takes a free one (default: 8000)")
    serve.add_argument("--quiet", action="store_true", help="log warnings and errors only")
    commands.add_parser("demo", help="start the service, post an example to it, show the answer, and end")
    definition = commands.add_parser("openapi", help="write the API definition and the example requests")
    definition.add_argument(
        "--folder", type=Path, default=Path("openapi"), help="where to (default: openapi)"
    )
    definition.add_argument("--check", action="store_true", help="write nothing; exit with 1 when stale")
    chosen = parser.parse_args(arguments)
    obstacle = _missing_libraries()
    if obstacle is not None:
        print(obstacle, file=sys.stderr)
        return 1
    match chosen.command:
        case "serve":
            return _serve(chosen.host, chosen.port, quiet=chosen.quiet)
        case "demo":
            return _demo()
    return _openapi(chosen.folder, check=chosen.check)


def _serve(host: str, port: int, *, quiet: bool) -> int:
    from service.api.app import create_app
    from service.jobs import tables
    from service.settings import Settings

    try:
        settings = Settings()
        tables.connect(settings.database).dispose()
    except ValidationError as error:
        print(f"A setting cannot be used:\n{error}", file=sys.stderr)
        return 2
    except (SQLAlchemyError, OSError, ImportError) as error:
        print(f"The job store cannot be opened, see WELLPOSED_DATABASE: {error}", file=sys.stderr)
        return 1
    app = create_app(settings)
    logging = copy.deepcopy(LOGGING_CONFIG)
    logging["loggers"]["wellposed"] = {"handlers": ["default"], "level": "INFO", "propagate": False}
    # Standard output is for the line that says where the service listens.
    logging["handlers"]["access"]["stream"] = "ext://sys.stderr"
    config = uvicorn.Config(
        app,
        host,
        port,
        log_config=logging,
        log_level="warning" if quiet else "info",
        access_log=not quiet,
        timeout_graceful_shutdown=_DRAIN,
        server_header=False,
    )
    try:
        listening = _bound(host, port)
    except OSError as error:
        print(f"Nothing can listen at {host}, port {port}: {error}", file=sys.stderr)
        return 1
    address, actual = listening.getsockname()[:2]
    from service.demo.run import LISTENING

    shown = f"[{address}]" if listening.family == socket.AF_INET6 else address
    print(f"{LISTENING}http://{shown}:{actual}", flush=True)
    with suppress(KeyboardInterrupt):
        _Server(app, config).run(sockets=[listening])
    return 0


def _bound(host: str, port: int) -> socket.socket:
    """A socket that listens at the address; raises OSError when it is taken or is none."""
    family, kind, protocol, _, address = socket.getaddrinfo(
        host, port, type=socket.SOCK_STREAM, proto=socket.IPPROTO_TCP, flags=socket.AI_PASSIVE
    )[0]
    # The protocol is named, or asyncio leaves Nagle's algorithm on: 40 ms for every small answer.
    listening = socket.socket(family, kind, protocol)
    listening.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
    listening.bind(address)
    # From here on requests wait for the service to come up, instead of being refused.
    listening.listen(_BACKLOG)
    return listening


class _Server(uvicorn.Server):
    """Lets synchronous requests go when it is told to stop, instead of waiting for their jobs."""

    def __init__(self, app: FastAPI, config: uvicorn.Config) -> None:
        super().__init__(config)
        self._app = app

    async def shutdown(self, sockets: list[socket.socket] | None = None) -> None:
        """Stop serving; jobs go on at the next start."""
        self._app.state.services.reception.close()
        await super().shutdown(sockets)


def _demo() -> int:
    from service.demo import run

    try:
        return run.main()
    except RuntimeError as error:
        print(f"The demo ends here: {error}.", file=sys.stderr)
        return 1


def _openapi(folder: Path, *, check: bool) -> int:
    from service.api.files import files

    stale = [
        name
        for name, text in files().items()
        if not (folder / name).is_file() or (folder / name).read_text(encoding="utf-8") != text
    ]
    if check:
        for name in stale:
            print(f"{folder / name} is stale: run python -m service openapi", file=sys.stderr)
        return 1 if stale else 0
    for name in stale:
        (folder / name).parent.mkdir(parents=True, exist_ok=True)
        (folder / name).write_text(files()[name], encoding="utf-8")
        print(f"written: {folder / name}")
    return 0


def _missing_libraries() -> str | None:
    try:
        importlib.import_module("gmsh")
    except OSError as error:
        return (
            f"The mesh generator gmsh cannot be loaded: {error}.\n"
            f"It needs shared libraries that slim systems leave out. On Debian and Ubuntu:\n"
            f"    apt-get install --no-install-recommends {_PACKAGES}"
        )
    return None


if __name__ == "__main__":
    sys.exit(main())
