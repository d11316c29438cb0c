"""Which mode runs, and what the answer looks like in each."""

import http.client
import time
import uuid
from typing import Any

import httpx
import pytest
from running import ended, submit

RESPOND_ASYNC = [("Prefer", "respond-async")]


def execute(
    client: httpx.Client,
    process: str = "echo",
    prefer: list[tuple[str, str]] | None = None,
    envelope: dict[str, Any] | None = None,
    **inputs: Any,
) -> httpx.Response:
    """POST an execution with inputs no one has asked for before."""
    fresh = {"problem": {"title": str(uuid.uuid4())}}
    body = {"inputs": {**fresh, **inputs}, **(envelope or {})}
    return client.post(f"/processes/{process}/execution", json=body, headers=prefer or [])


@pytest.mark.parametrize(
    ("process", "prefer", "status", "applied"),
    [
        ("echo", [], 200, None),
        ("echo", RESPOND_ASYNC, 201, "respond-async"),
        ("echo", [("Prefer", "Respond-Async")], 201, "respond-async"),
        ("echo", [("Prefer", "handling=lenient"), ("Prefer", "respond-async")], 201, "respond-async"),
        ("echo", [("Prefer", "respond-async, wait=0")], 201, "respond-async"),
        ("echo", [("Prefer", "respond-async, wait=abc")], 201, "respond-async"),
        ("echo", [("Prefer", 'respond-async;x=1, wait="1"')], 200, "respond-async, wait=1"),
        ("echo", [("Prefer", "respond-async"), ("Prefer", "wait=1")], 200, "respond-async, wait=1"),
        ("echo", [("Prefer", "respond-async, wait=99999")], 200, "respond-async, wait=1"),
        ("echo", [("Prefer", "respond-sync")], 200, None),
        ("echo", [("Prefer", "wait=10")], 200, None),
        ("echo", [("Prefer", "")], 200, None),
        ("echo-sync", [], 200, None),
        ("echo-sync", RESPOND_ASYNC, 200, None),
        ("echo-async", [], 201, None),
        ("echo-async", RESPOND_ASYNC, 201, "respond-async"),
        ("echo-async", [("Prefer", "wait=10")], 201, None),
    ],
)
def test_modes(
    client: httpx.Client, process: str, prefer: list[tuple[str, str]], status: int, applied: str | None
) -> None:
    response = execute(client, process, prefer)
    assert response.status_code == status
    assert response.headers.get("preference-applied") == applied
    if status == 201:
        job = response.json()
        assert response.headers["location"].endswith(f"/jobs/{job['jobID']}")
        assert int(response.headers["retry-after"]) >= 1
        assert job["status"] in ("accepted", "running")
        assert ended(client, job["jobID"])["status"] == "successful"
    else:
        assert response.json()["constants"]["friedrichs"]["lower"] == 1.0


def test_a_preference_with_a_blank_after_it(client: httpx.Client) -> None:
    # As one test suite sends it; careful clients cannot.
    connection = http.client.HTTPConnection(client.base_url.host, client.base_url.port)
    headers = {"Content-Type": "application/json", "Prefer": "respond-async "}
    connection.request("POST", "/processes/echo/execution", b'{"inputs": {}}', headers)
    assert connection.getresponse().status == 201
    connection.close()


def test_a_synchronous_answer_names_its_job(client: httpx.Client) -> None:
    response = execute(client)
    link = response.headers["link"]
    assert "rel=monitor" in link
    status = client.get(link[1 : link.index(">")]).json()
    assert status["status"] == "successful"
    assert status["progress"] == 100
    result = client.get(f"/jobs/{status['jobID']}/results").json()
    assert result == response.json()


def test_waiting_ends_after_the_time_preferred(client: httpx.Client) -> None:
    began = time.monotonic()
    response = execute(client, prefer=[("Prefer", "respond-async, wait=1")], seconds=3)
    assert response.status_code == 201
    assert 0.9 < time.monotonic() - began < 2.0
    assert response.headers["preference-applied"] == "respond-async, wait=1"
    assert response.json()["status"] == "running"
    client.delete(f"/jobs/{response.json()['jobID']}")


def test_beyond_the_synchronous_limit_the_job_goes_on(client: httpx.Client) -> None:
    response = execute(client, seconds=2)
    assert response.status_code == 504
    problem = response.json()
    assert problem["type"] == "urn:wellposed:problem:synchronous-limit"
    assert problem["jobID"] in problem["detail"]
    assert client.get(problem["job"]).json()["status"] == "running"
    assert ended(client, problem["jobID"])["status"] == "successful"


def test_the_default_response_is_the_bare_output(client: httpx.Client) -> None:
    for envelope in ({}, {"response": "raw"}, {"outputs": {"result": {}}}, {"outputs": {}}):
        assert execute(client, envelope=envelope).json()["target_met"] is True


def test_a_document_wraps_the_output(client: httpx.Client) -> None:
    asked = {"response": "document", "outputs": {"result": {"transmissionMode": "value"}}}
    response = execute(client, envelope=asked)
    assert list(response.json()) == ["result"]
    assert response.json()["result"]["value"]["target_met"] is True


def test_the_form_asked_for_is_kept_with_the_job(client: httpx.Client) -> None:
    job_id = execute(client, prefer=RESPOND_ASYNC, envelope={"response": "document"}).json()["jobID"]
    ended(client, job_id)
    document = client.get(f"/jobs/{job_id}/results").json()
    assert client.get(f"/jobs/{job_id}/results/result").json() == document["result"]["value"]


@pytest.mark.parametrize(
    "value",
    [
        {"title": "bare"},
        {"value": {"title": "wrapped"}},
        {"value": {"title": "typed"}, "mediaType": "application/json"},
        {"value": {"title": "nested"}, "format": {"mediaType": "application/geo+json", "encoding": "UTF-8"}},
        {"href": "data:application/json;base64,eyJ0aXRsZSI6ImxpbmsifQ=="},
        {"href": "data:application/json,%7B%22title%22%3A%22link%22%7D", "type": "application/json"},
        {"href": 'data:,{"title":"link"}'},
    ],
)
def test_values_in_every_form(client: httpx.Client, value: dict[str, Any]) -> None:
    response = execute(client, problem=value)
    assert response.status_code == 200
    assert set(response.json()["echo"]) == {"title"}


def test_a_qualified_number(client: httpx.Client) -> None:
    assert execute(client, seconds={"value": 0.01}).status_code == 200


def test_the_same_request_is_answered_from_the_first(client: httpx.Client) -> None:
    title = {"title": str(uuid.uuid4())}
    first = execute(client, problem=title).json()
    second = execute(client, problem={"value": title}, envelope={"response": "document"})
    again = second.json()["result"]["value"]
    assert first["provenance"]["cached"] is False
    assert again["provenance"]["cached"] is True
    assert again["provenance"]["computed_by"] == first["provenance"]["computed_by"]
    assert again["provenance"]["pid"] == first["provenance"]["pid"]
    job_id = second.headers["link"].split("/jobs/")[1].split(">")[0]
    assert job_id != first["provenance"]["computed_by"]
    assert first["provenance"]["computed_by"] in client.get(f"/jobs/{job_id}").json()["message"]


def test_a_known_answer_is_still_a_job_when_asked_asynchronously(client: httpx.Client) -> None:
    title = {"title": str(uuid.uuid4())}
    execute(client, problem=title)
    response = execute(client, prefer=RESPOND_ASYNC, problem=title)
    assert response.status_code == 201
    assert response.json()["status"] == "successful"
    assert "retry-after" not in response.headers


def test_another_process_or_input_is_another_request(client: httpx.Client) -> None:
    title = {"title": str(uuid.uuid4())}
    execute(client, problem=title)
    for answer in (execute(client, "echo-sync", problem=title), execute(client, problem=title, limit=29)):
        assert answer.json()["provenance"]["cached"] is False


def test_a_result_short_of_its_target_is_not_reused(client: httpx.Client) -> None:
    title = {"title": str(uuid.uuid4())}
    for _ in range(2):
        result = execute(client, "unmet", problem=title).json()
        assert result["target_met"] is False
        assert result["provenance"]["cached"] is False


def test_removed_results_are_not_reused(client: httpx.Client) -> None:
    title = {"title": str(uuid.uuid4())}
    first = execute(client, problem=title).json()["provenance"]["computed_by"]
    client.delete(f"/jobs/{first}")
    assert execute(client, problem=title).json()["provenance"]["cached"] is False


def test_dismissing_lets_a_synchronous_request_go(client: httpx.Client, service: Any) -> None:
    job_id = submit(client, "hang")
    client.delete(f"/jobs/{job_id}")
    assert client.get(f"/jobs/{job_id}/results").status_code == 410


def test_prefer_means_nothing_elsewhere(client: httpx.Client) -> None:
    for path in ("/", "/processes", "/jobs"):
        response = client.get(path, headers={"Prefer": "respond-async"})
        assert response.status_code == 200
        assert "preference-applied" not in response.headers
