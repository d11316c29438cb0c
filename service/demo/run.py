"""The demo: starts the service, posts the retention basin to it over HTTP, and reads out the answer."""

import os
import subprocess
import sys
import tempfile
import time
from collections.abc import Iterator
from contextlib import contextmanager
from typing import IO, Any

import httpx

from service.demo import examples, words
from service.processes.base import JSON

LISTENING = "Wellposed listens at "
"""What ``serve`` says first on its standard output; the address follows."""

_START = 60.0
_POLL = 0.05


def main() -> int:
    """Run the demo; returns the exit code: 0 when the enclosures were computed and printed."""
    request = examples.examples()[examples.DEMO]
    with tempfile.TemporaryDirectory(prefix="wellposed-demo-") as state, _service(state) as base:
        print(f"The service runs at {base}, with its job store in a temporary folder.\n")
        with httpx.Client(base_url=base, timeout=30.0, trust_env=False) as client:
            _wait_until_ready(client)
            return _tell(client, request)


def _tell(client: httpx.Client, request: JSON) -> int:
    problem = request["inputs"]["problem"]
    print(f"POST /processes/constants/execution: {problem['title']}")
    for part in problem["boundary"]:
        print(f"    {part['name']}: {part['condition']}")
    response = client.post(
        "/processes/constants/execution", json=request, headers={"Prefer": "respond-async"}
    )
    if response.status_code != 201:
        print(f"The service refused the request ({response.status_code}): {response.text}", file=sys.stderr)
        return 1
    status = response.json()
    print(f"Accepted as job {status['jobID']}. Its progress:")
    status = _follow(client, response.headers["Location"], status)
    if status["status"] != "successful":
        print(f"The job ended as {status['status']}: {status['message']}", file=sys.stderr)
        return 1
    result = client.get(f"/jobs/{status['jobID']}/results").raise_for_status().json()
    print(f"\nProved on this domain, lengths in {problem['length_unit']}:\n")
    print("\n\n".join(words.enclosures(result)))
    for warning in result.get("warnings", []):
        print(f"\nNote: {warning}")
    print(f"\n{words.CAUTION}")
    return 0


def _follow(client: httpx.Client, location: str, status: JSON) -> JSON:
    shown = None
    while True:
        line = f"    {status['progress']:3d} %  {status['message']}"
        if line != shown:
            print(line, flush=True)
            shown = line
        if status["status"] not in ("accepted", "running"):
            return status
        time.sleep(_POLL)
        status = client.get(location).raise_for_status().json()


def _wait_until_ready(client: httpx.Client) -> None:
    deadline = time.monotonic() + _START
    while client.get("/readyz").status_code != 200:
        if time.monotonic() > deadline:
            raise RuntimeError("the service did not become ready")
        time.sleep(_POLL)


@contextmanager
def _service(state: str) -> Iterator[str]:
    """The service in a process of its own on a free port of this machine; yields its address."""
    settings = {name: value for name, value in os.environ.items() if not name.startswith("WELLPOSED_")}
    settings["WELLPOSED_STATE"] = state
    command = [sys.executable, "-m", "service", "serve", "--host", "127.0.0.1", "--port", "0", "--quiet"]
    with subprocess.Popen(command, env=settings, stdout=subprocess.PIPE, text=True) as process:
        try:
            yield _address(process.stdout)
        finally:
            process.terminate()
            try:
                process.wait(10.0)
            except subprocess.TimeoutExpired:
                process.kill()


def _address(output: IO[Any] | None) -> str:
    assert output is not None
    line = str(output.readline())
    if not line.startswith(LISTENING):
        raise RuntimeError("the service did not start; what it said is above")
    return line.removeprefix(LISTENING).strip()
