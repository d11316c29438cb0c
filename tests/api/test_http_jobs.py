"""The life of jobs as clients see it: status, list, failure, dismissal."""

import re
import time
import uuid
from datetime import UTC, datetime, timedelta
from typing import Any

import httpx
import pytest
from running import ended, submit, wait_for

RFC3339 = re.compile(r"\d{4}-\d\d-\d\dT\d\d:\d\d:\d\d\.\d{3}Z")
REL = "http://www.opengis.net/def/rel/ogc/1.0/"
OURS = "urn:wellposed:problem:"


def fresh() -> dict[str, str]:
    return {"title": str(uuid.uuid4())}


def test_a_running_job_shows_enclosures_and_never_falls_back(client: httpx.Client) -> None:
    job_id = submit(client, "echo", problem=fresh(), seconds=1)
    seen: list[dict[str, Any]] = []
    while not seen or seen[-1]["status"] in ("accepted", "running"):
        response = client.get(f"/jobs/{job_id}")
        seen.append(response.json())
        running = seen[-1]["status"] in ("accepted", "running")
        assert ("retry-after" in response.headers) == running
        assert (seen[-1]["progress"] == 100) == (seen[-1]["status"] == "successful")
        time.sleep(0.05)
    progress = [status["progress"] for status in seen]
    assert progress == sorted(progress)
    assert len(set(progress)) > 4
    widths = [status["partial"]["constants"]["friedrichs"]["upper"] for status in seen if "partial" in status]
    assert widths == sorted(widths, reverse=True)
    assert len(set(widths)) > 4
    assert any(status["message"].startswith("step") for status in seen)


def test_the_members_of_a_status(client: httpx.Client) -> None:
    job_id = submit(client, "echo", problem=fresh())
    status = ended(client, job_id)
    assert status["jobID"] == status["id"] == job_id
    assert uuid.UUID(job_id).version == 4
    assert status["type"] == "process"
    assert status["processingEntityType"] == "ogc-api-processes"
    assert status["processID"] == "echo"
    times = [status[name] for name in ("created", "started", "finished")]
    assert all(RFC3339.fullmatch(status[name]) for name in ("created", "started", "finished", "updated"))
    assert times == sorted(times)
    kept = datetime.fromisoformat(status["expires"]) - datetime.fromisoformat(status["finished"])
    assert kept == timedelta(hours=168)
    links = {link["rel"]: link for link in status["links"]}
    assert {"self", "status", "up", REL + "results"} <= links.keys()
    assert client.get(links[REL + "results"]["href"]).status_code == 200


@pytest.mark.parametrize(
    ("process", "status", "kind"),
    [
        ("refuse", 422, "domain-not-connected"),
        ("bug", 500, "internal-error"),
        ("leave", 500, "internal-error"),
        ("not-a-number", 500, "internal-error"),
        ("crash", 500, "worker-crashed"),
        ("grab", 507, "memory-limit"),
    ],
)
def test_a_failed_job_says_why_everywhere(client: httpx.Client, process: str, status: int, kind: str) -> None:
    job_id = submit(client, process, problem=fresh())
    document = ended(client, job_id)
    assert document["status"] == "failed"
    assert document["progress"] < 100
    assert document["exception"]["type"] == OURS + kind
    assert document["message"] == document["exception"]["detail"]
    assert REL + "exceptions" in {link["rel"] for link in document["links"]}
    for path in (f"/jobs/{job_id}/results", f"/jobs/{job_id}/results/result"):
        response = client.get(path)
        assert response.status_code == status
        assert response.headers["content-type"] == "application/problem+json"
        problem = response.json()
        assert problem["instance"] == f"/jobs/{job_id}"
        assert {name: problem[name] for name in document["exception"]} == document["exception"]
    synchronous = client.post(f"/processes/{process}/execution", json={"inputs": {"problem": fresh()}})
    assert synchronous.status_code == status
    assert synchronous.json()["type"] == OURS + kind
    assert "rel=monitor" in synchronous.headers["link"]


def test_a_bug_shows_nothing_of_the_code(client: httpx.Client, service: Any) -> None:
    job_id = submit(client, "bug", problem=fresh())
    status = ended(client, job_id)
    text = client.get(f"/jobs/{job_id}/results").text + str(status)
    assert job_id in status["message"]
    assert not any(word in text for word in ("Traceback", "KeyError", "secret", ".py"))
    log = (service.state / "logs" / f"{job_id}.log").read_text()
    assert "a secret of the code" in log
    assert "a word on stdout" in log


def test_a_crash_keeps_the_enclosures_found(client: httpx.Client) -> None:
    status = ended(client, submit(client, "crash", problem=fresh()))
    assert "SIGSEGV" in status["message"]
    assert status["partial"]["constants"]["friedrichs"]["lower"] == 1.0


def test_the_wall_limit_ends_a_hang(client: httpx.Client) -> None:
    began = time.monotonic()
    job_id = submit(client, "hang", problem=fresh(), limit=0.3)
    status = ended(client, job_id)
    assert time.monotonic() - began < 2.0
    assert status["exception"]["type"] == OURS + "time-limit"
    assert client.get(f"/jobs/{job_id}/results").status_code == 504
    assert client.post("/processes/echo/execution", json={"inputs": {"problem": fresh()}}).status_code == 200


def test_the_wall_limit_keeps_what_was_proved(client: httpx.Client) -> None:
    job_id = submit(client, "hang-with-enclosures", problem=fresh(), limit=0.3)
    assert ended(client, job_id)["status"] == "successful"
    result = client.get(f"/jobs/{job_id}/results").json()
    assert result["target_met"] is False
    assert len(result["warnings"]) == 1
    assert "0.5 s" in result["warnings"][0]
    assert result["constants"]["friedrichs"]["lower"] == 1.0


def test_dismissing_a_live_job_keeps_its_enclosures(client: httpx.Client) -> None:
    job_id = submit(client, "hang-with-enclosures", problem=fresh())
    wait_for(lambda: "partial" in client.get(f"/jobs/{job_id}").json())
    response = client.delete(f"/jobs/{job_id}")
    assert response.status_code == 200
    assert response.json()["status"] == "dismissed"
    for status in (response.json(), client.get(f"/jobs/{job_id}").json()):
        assert status["status"] == "dismissed"
        assert status["partial"]["constants"]["friedrichs"]["lower"] == 1.0
        assert status["progress"] < 100
        assert "finished" in status
    assert client.get(f"/jobs/{job_id}/results").status_code == 410
    assert client.delete(f"/jobs/{job_id}").status_code == 410
    assert client.get(f"/jobs/{job_id}").json()["status"] == "dismissed"


def test_dismissing_a_finished_job_removes_what_it_left(client: httpx.Client) -> None:
    job_id = submit(client, "echo", problem=fresh())
    ended(client, job_id)
    assert client.get(f"/jobs/{job_id}/results").status_code == 200
    assert client.delete(f"/jobs/{job_id}").json()["status"] == "dismissed"
    response = client.get(f"/jobs/{job_id}/results")
    assert response.status_code == 410
    assert response.json()["type"] == OURS + "job-dismissed"
    assert client.delete(f"/jobs/{job_id}").status_code == 410
    assert client.get(f"/jobs/{job_id}").status_code == 200


def test_dismissing_a_waiting_job(client: httpx.Client) -> None:
    busy = [submit(client, "hang", problem=fresh()) for _ in range(2)]
    wait_for(lambda: all(client.get(f"/jobs/{each}").json()["status"] == "running" for each in busy))
    waiting = submit(client, "echo", problem=fresh())
    assert client.get(f"/jobs/{waiting}").json()["status"] == "accepted"
    assert client.delete(f"/jobs/{waiting}").json()["status"] == "dismissed"
    for each in busy:
        client.delete(f"/jobs/{each}")
    after = ended(client, submit(client, "echo", problem=fresh()))
    assert after["status"] == "successful"
    assert "started" not in client.get(f"/jobs/{waiting}").json()


def test_an_unknown_output(client: httpx.Client) -> None:
    job_id = submit(client, "echo", problem=fresh())
    ended(client, job_id)
    response = client.get(f"/jobs/{job_id}/results/other")
    assert response.status_code == 404
    assert response.json()["type"] == OURS + "no-such-output"


def listed(client: httpx.Client, query: str = "") -> list[dict[str, Any]]:
    response = client.get(f"/jobs?limit=1000&{query}")
    assert response.status_code == 200, response.text
    jobs: list[dict[str, Any]] = response.json()["jobs"]
    return jobs


def test_the_list_is_filtered(client: httpx.Client) -> None:
    short = submit(client, "echo-async", problem=fresh())
    long = submit(client, "echo", problem=fresh(), seconds=1.2)
    failed = submit(client, "refuse", problem=fresh())
    for each in (short, long, failed):
        ended(client, each)

    def ids(query: str) -> set[str]:
        return {job["jobID"] for job in listed(client, query)} & {short, long, failed}

    assert ids("") == {short, long, failed}
    assert ids("type=process") == {short, long, failed}
    assert ids("processID=echo-async") == {short}
    assert ids("processID=echo-async,echo") == ids("processID=echo-async&processID=echo") == {short, long}
    assert ids("status=failed") == {failed}
    assert ids("status=failed,successful") == ids("status=failed&status=successful") == {short, long, failed}
    assert ids("status=running") == set()
    assert ids("minDuration=1") == {long}
    assert ids("maxDuration=1") == {short, failed}
    assert ids("minDuration=1&maxDuration=1") == set()


def test_the_list_is_filtered_by_time(client: httpx.Client) -> None:
    job_id = submit(client, "echo", problem=fresh())
    created = datetime.fromisoformat(ended(client, job_id)["created"])

    def found(interval: str) -> bool:
        return job_id in {job["jobID"] for job in listed(client, f"datetime={interval}")}

    def at(seconds: float) -> str:
        return (created + timedelta(seconds=seconds)).strftime("%Y-%m-%dT%H:%M:%SZ")

    assert found(f"{at(-5)}/{at(5)}")
    assert found(f"{at(-5)}/..")
    assert found(f"{at(-5)}/")
    assert found(f"../{at(5)}")
    assert found(f"/{at(5)}")
    assert found(created.strftime("%Y-%m-%d"))
    assert found(at(0))
    assert not found(f"{at(5)}/..")
    assert not found(f"../{at(-5)}")
    assert not found(at(60))
    east = created.astimezone(tz=None).astimezone(UTC) + timedelta(hours=2, seconds=-5)
    assert found(east.strftime("%Y-%m-%dT%H:%M:%S%%2B02:00/.."))


def test_duration_of_a_running_job_counts_until_now(client: httpx.Client) -> None:
    job_id = submit(client, "hang", problem=fresh())
    wait_for(lambda: client.get(f"/jobs/{job_id}").json()["status"] == "running")
    assert job_id in {job["jobID"] for job in listed(client, "maxDuration=5&status=running")}
    wait_for(lambda: job_id in {job["jobID"] for job in listed(client, "minDuration=1")})
    client.delete(f"/jobs/{job_id}")


@pytest.mark.parametrize(
    ("query", "status"),
    [
        ("colour=red", 400),
        ("Limit=1", 400),
        ("type=other", 400),
        ("type=", 400),
        ("status=done", 400),
        ("status=failed,", 400),
        ("datetime=yesterday", 400),
        ("datetime=2026-12-01T08:00:00", 400),
        ("datetime=2026-13-01", 400),
        ("datetime=20261201", 400),
        ("datetime=2026-12-02/2026-12-01", 400),
        ("datetime=../../..", 400),
        ("minDuration=-1", 400),
        ("minDuration=1.5", 400),
        ("maxDuration=x", 400),
        ("maxDuration=1&maxDuration=2", 400),
        ("processID=none", 404),
    ],
)
def test_filters_that_cannot_be_used(client: httpx.Client, query: str, status: int) -> None:
    response = client.get(f"/jobs?{query}")
    assert response.status_code == status
    if status == 404:
        assert response.json()["type"].endswith("/no-such-process")


def test_walking_the_list_finds_every_job_once_newest_first(client: httpx.Client) -> None:
    for _ in range(7):
        submit(client, "echo-async", problem=fresh())
    found: list[dict[str, Any]] = []
    url = "/jobs?limit=3&processID=echo-async"
    while url:
        page = client.get(url).json()
        assert len(page["jobs"]) <= 3
        found += page["jobs"]
        url = next((link["href"] for link in page["links"] if link["rel"] == "next"), "")
    everything = listed(client, "processID=echo-async")
    assert [job["jobID"] for job in found] == [job["jobID"] for job in everything]
    assert len(found) >= 7
    times = [job["created"] for job in found]
    assert times == sorted(times, reverse=True)
    assert all(job["processID"] == "echo-async" for job in found)
