"""The service as a process of its own on a real socket, and a client that checks every answer."""

import os
import re
import signal
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import httpx
import psutil
from jsonschema import Draft202012Validator

STUBS = "stub_processes:PROCESSES"
SYNC_SECONDS = 1.0
BODY_BYTES = 20_000
_SUPPORT = Path(__file__).parent
_ROOT = _SUPPORT.parents[1]
_LISTENING = "Wellposed listens at "


class Service:
    """``python -m service serve`` on a free port; settings without their prefix, in lower case."""

    def __init__(self, state: Path, **settings: Any) -> None:
        self.state = state
        environment = {name: text for name, text in os.environ.items() if not name.startswith("WELLPOSED_")}
        environment |= {"PYTHONPATH": os.pathsep.join([str(_ROOT), str(_SUPPORT)])}
        stated = {"state": state, "processes": STUBS, "workers": 2, **settings}
        environment |= {f"WELLPOSED_{name.upper()}": str(value) for name, value in stated.items()}
        self.log = state.with_suffix(".log")
        self._stderr = self.log.open("a")
        self.process = subprocess.Popen(
            [sys.executable, "-m", "service", "serve", "--port", "0", "--quiet"],
            env=environment,
            cwd=state.parent,
            stdout=subprocess.PIPE,
            stderr=self._stderr,
            text=True,
        )
        try:
            self._come_up()
        except BaseException:
            self.process.kill()
            raise

    def _come_up(self) -> None:
        assert self.process.stdout is not None
        line = self.process.stdout.readline()
        assert line.startswith(_LISTENING), self.log.read_text()
        self.base = line.removeprefix(_LISTENING).strip()
        self.client = httpx.Client(base_url=self.base, timeout=30.0, trust_env=False, verify=False)
        wait_for(lambda: self.client.get("/readyz").status_code == 200)

    def family(self) -> list[psutil.Process]:
        """Every process the service started, directly or not."""
        return psutil.Process(self.process.pid).children(recursive=True)

    def kill(self) -> None:
        """End the service as a power cut would."""
        self.process.send_signal(signal.SIGKILL)
        self._close()

    def stop(self) -> None:
        """End the service as an operator would."""
        if self.process.poll() is None:
            self.process.send_signal(signal.SIGTERM)
        self._close()

    def _close(self) -> None:
        self.process.wait(15.0)
        self.client.close()
        self._stderr.close()
        assert self.process.stdout is not None
        self.process.stdout.close()


class Definition:
    """Checks responses against the API definition the service publishes."""

    def __init__(self, base: str) -> None:
        self.document = httpx.get(f"{base}/openapi.json", trust_env=False).raise_for_status().json()
        self.seen: set[tuple[str, str, str]] = set()
        self._paths = [
            (re.compile(re.sub(r"\{\w+\}", "[^/]+", path)), path) for path in self.document["paths"]
        ]

    def check(self, response: httpx.Response) -> None:
        """Fail when the status, the media type or the body is not as documented for the operation."""
        request = response.request
        path = request.url.path.rstrip("/") or "/"
        template = next((known for pattern, known in self._paths if pattern.fullmatch(path)), None)
        method = {"HEAD": "get"}.get(request.method, request.method.lower())
        if template is None or method not in self.document["paths"][template]:
            assert response.status_code in (404, 405)
            return
        documented = self.document["paths"][template][method]["responses"]
        status = str(response.status_code)
        assert status in documented, f"{method} {template} answered an undocumented {status}"
        media_type = response.headers["content-type"]
        if media_type.startswith("text/html"):
            media_type = "text/html"
        content = documented[status]["content"]
        assert media_type in content, f"{method} {template} {status}: undocumented {media_type}"
        self.seen.add((method, template, status))
        if request.method != "HEAD" and "json" in media_type:
            response.read()
            self._validator(method, template, status, media_type).validate(response.json())

    def _validator(self, method: str, template: str, status: str, media_type: str) -> Draft202012Validator:
        content = self.document["paths"][template][method]["responses"][status]["content"]
        schema = {**content[media_type]["schema"], "components": self.document["components"]}
        return Draft202012Validator(schema, format_checker=Draft202012Validator.FORMAT_CHECKER)


def wait_for(condition: Callable[[], Any], seconds: float = 20.0) -> Any:
    """The first true value of ``condition``; fails after ``seconds``."""
    deadline = time.monotonic() + seconds
    while not (value := condition()):
        assert time.monotonic() < deadline, "waited in vain"
        time.sleep(0.01)
    return value


def ended(client: httpx.Client, job_id: str, seconds: float = 20.0) -> dict[str, Any]:
    """The job's status once it has ended."""

    def look() -> dict[str, Any] | None:
        status = client.get(f"/jobs/{job_id}").json()
        return status if status["status"] not in ("accepted", "running") else None

    return wait_for(look, seconds)


def submit(client: httpx.Client, process: str, **inputs: Any) -> str:
    """Submit a job asynchronously; returns its id."""
    body = {"inputs": {"problem": {}, **inputs}}
    response = client.post(f"/processes/{process}/execution", json=body, headers={"Prefer": "respond-async"})
    assert response.status_code == 201, response.text
    return str(response.json()["jobID"])


def alive(pid: int) -> bool:
    """Whether the process exists and is no zombie."""
    try:
        return psutil.Process(pid).status() != psutil.STATUS_ZOMBIE
    except psutil.NoSuchProcess:
        return False
