"""A client of the open standard that knows nothing of us does everything."""

import time
import uuid
from typing import Any

import pytest
from owslib.ogcapi.processes import Processes
from running import Service


@pytest.fixture
def client(service: Service) -> Processes:
    return Processes(service.base)


def problem() -> dict[str, Any]:
    return {"problem": {"value": {"title": str(uuid.uuid4())}}}


def job_path(client: Processes) -> str:
    location = client.response_headers["Location"]
    return "jobs/" + location.rsplit("/", 1)[1]


def polled(client: Processes, path: str) -> dict[str, Any]:
    for _ in range(200):
        status = client._request(path=path)
        if status["status"] not in ("accepted", "running"):
            return status
        time.sleep(0.05)
    raise AssertionError("the job did not end")


def test_it_finds_its_way(client: Processes) -> None:
    assert client.api()["openapi"].startswith("3.0")
    assert any(name.endswith("/conf/core") for name in client.conformance()["conformsTo"])
    assert "echo" in [process["id"] for process in client.processes()]
    described = client.process("echo")
    assert set(described["inputs"]) == {"problem", "seconds", "limit", "marker"}


def test_it_executes_synchronously(client: Processes) -> None:
    results = client.execute("echo", problem())
    assert results["result"]["value"]["target_met"] is True
    bare = client.execute("echo", problem(), response="raw")
    assert bare["target_met"] is True


def test_it_executes_asynchronously_polls_and_fetches(client: Processes) -> None:
    status = client.execute("echo", {**problem(), "seconds": 0.3}, async_=True)
    assert status["status"] == "accepted"
    path = job_path(client)
    assert polled(client, path)["status"] == "successful"
    results = client._request(path=f"{path}/results")
    assert results["result"]["value"]["constants"]["friedrichs"]["lower"] == 1.0
    assert status["jobID"] in [job["jobID"] for job in client._request(path="jobs")["jobs"]]


def test_it_dismisses(client: Processes) -> None:
    client.execute("hang", problem(), async_=True)
    path = job_path(client)
    assert client._request(method="DELETE", path=path)["status"] == "dismissed"
    with pytest.raises(RuntimeError, match="job-dismissed"):
        client._request(path=f"{path}/results")


def test_it_sees_errors_as_errors(client: Processes) -> None:
    with pytest.raises(RuntimeError, match="no-such-process"):
        client.process("none")
    with pytest.raises(RuntimeError, match="/inputs/problem/value/size"):
        client.execute("echo", {"problem": {"value": {"size": "3"}}})
    with pytest.raises(RuntimeError, match="domain-not-connected"):
        client.execute("refuse", problem())
    status = client.execute("refuse", problem(), async_=True)
    failed = polled(client, f"jobs/{status['jobID']}")
    assert failed["status"] == "failed"
    with pytest.raises(RuntimeError, match="domain-not-connected"):
        client._request(path=f"jobs/{status['jobID']}/results")


def test_its_stray_preference_on_reading_does_no_harm(client: Processes, service: Service) -> None:
    client.execute("echo", problem(), async_=True)
    again = Processes(service.base)
    assert again.process("echo")["id"] == "echo"
    assert polled(again, job_path(client))["status"] == "successful"
