"""What happens when children, or the service itself, come to harm: real processes, really killed."""

import os
import resource
import signal
import sqlite3
import threading
import time
from collections.abc import Iterator
from pathlib import Path

import httpx
import psutil
import pytest
from running import Service, alive, ended, submit, wait_for

OURS = "urn:wellposed:problem:"
MEMORY = 400 * 2**20


@pytest.fixture(scope="module")
def service(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Service]:
    running = Service(
        tmp_path_factory.mktemp("supervision") / "state", grace_seconds=0.2, workers=1, memory_bytes=MEMORY
    )
    yield running
    running.stop()


def spinning(client: httpx.Client, marker: Path) -> tuple[str, int, int]:
    """A job that burns a core; its id, its process and a process that it started."""
    job_id = submit(client, "spin", marker=str(marker))
    text = wait_for(lambda: marker.exists() and marker.read_text())
    process, helper = map(int, text.split())
    assert alive(process)
    assert alive(helper)
    return job_id, process, helper


def next_job_runs(client: httpx.Client) -> None:
    response = client.post(
        "/processes/echo/execution", json={"inputs": {"problem": {"title": os.urandom(8).hex()}}}
    )
    assert response.status_code == 200


def test_a_child_lives_alone(service: Service, tmp_path: Path) -> None:
    job_id, pid, _ = spinning(service.client, tmp_path / "marker")
    assert os.getsid(pid) == os.getpgid(pid) == pid
    assert psutil.Process(pid).environ()["OMP_NUM_THREADS"] == "1"
    assert psutil.Process(pid).environ()["OPENBLAS_NUM_THREADS"] == "1"
    assert psutil.Process(pid).num_threads() == 1
    assert resource.prlimit(pid, resource.RLIMIT_CORE) == (0, 0)
    assert MEMORY < resource.prlimit(pid, resource.RLIMIT_AS)[0] < MEMORY + 2**33
    service.client.delete(f"/jobs/{job_id}")


def test_children_find_the_processes_loaded_and_warm(service: Service) -> None:
    inputs = {"problem": {"title": "warm"}}
    results = [
        service.client.post("/processes/unmet/execution", json={"inputs": inputs}).json() for _ in range(2)
    ]
    assert [result["provenance"]["warmed"] for result in results] == [1, 1]
    assert results[0]["provenance"]["pid"] != results[1]["provenance"]["pid"]


def test_cancelling_frees_the_core_at_once(service: Service, tmp_path: Path) -> None:
    job_id, process, helper = spinning(service.client, tmp_path / "marker")
    began = time.monotonic()
    assert service.client.delete(f"/jobs/{job_id}").status_code == 200
    wait_for(lambda: not alive(process) and not alive(helper))
    assert time.monotonic() - began < 0.2
    next_job_runs(service.client)


def test_a_killed_child_fails_its_job_and_no_other(service: Service, tmp_path: Path) -> None:
    job_id, process, helper = spinning(service.client, tmp_path / "marker")
    os.kill(process, signal.SIGKILL)
    status = ended(service.client, job_id)
    assert status["exception"]["type"] == OURS + "worker-crashed"
    assert "SIGKILL" in status["exception"]["detail"]
    assert service.client.get(f"/jobs/{job_id}/results").status_code == 500
    wait_for(lambda: not alive(helper), 2.0)
    next_job_runs(service.client)


def test_a_child_over_its_memory_fails_its_job_and_no_other(service: Service) -> None:
    status = ended(service.client, submit(service.client, "hog"))
    assert status["exception"]["type"] == OURS + "memory-limit"
    assert "400 MiB" in status["exception"]["detail"]
    assert "limits.unknowns" in status["exception"]["detail"]
    assert service.client.get(f"/jobs/{status['jobID']}/results").status_code == 507
    next_job_runs(service.client)


def test_the_fork_server_is_replaced_when_it_dies(service: Service) -> None:
    server = next(each for each in service.family() if "forkserver" in " ".join(each.cmdline()[:4]))
    server.kill()
    wait_for(lambda: not alive(server.pid))
    next_job_runs(service.client)


def test_a_store_that_is_away_for_a_while(service: Service) -> None:
    def rename(old: str, new: str) -> None:
        with sqlite3.connect(service.state / "jobs-1.sqlite3", timeout=10.0) as connection:
            connection.execute(f"ALTER TABLE {old} RENAME TO {new}")
        connection.close()

    rename("jobs", "elsewhere")
    try:
        for response in (
            service.client.get("/jobs/any"),
            service.client.post("/processes/echo/execution", json={"inputs": {"problem": {"title": "away"}}}),
        ):
            assert response.status_code == 503
            assert response.json()["type"] == OURS + "store-unavailable"
            assert int(response.headers["retry-after"]) > 0
            assert "elsewhere" not in response.text
            assert "SELECT" not in response.text
        time.sleep(1.5)  # long enough for supervisors and housekeeper to stumble over it
    finally:
        rename("elsewhere", "jobs")
    next_job_runs(service.client)


def finishes(marker: Path) -> int:
    return len(marker.read_text().splitlines()) if marker.exists() else 0


def under_way(service: Service, marker: Path, seconds: float) -> str:
    """A job that has reported and leaves a line in ``marker`` when it finishes; its id."""
    job_id = submit(service.client, "echo", seconds=seconds, marker=str(marker))
    wait_for(lambda: service.client.get(f"/jobs/{job_id}").json()["progress"] >= 20)
    return job_id


def test_kill_9_of_the_service_loses_nothing_and_leaves_nothing(tmp_path: Path) -> None:
    marker, state = tmp_path / "marker", tmp_path / "state"
    first = Service(state, workers=1)
    job_id = under_way(first, marker, seconds=1.5)
    waiting = submit(first.client, "echo", problem={"title": "behind it"})
    before = first.client.get(f"/jobs/{job_id}").json()
    family = [process.pid for process in first.family()]
    assert len(family) >= 2
    first.kill()
    wait_for(lambda: not any(alive(pid) for pid in family), 2.0)
    assert finishes(marker) == 0

    second = Service(state, workers=1)
    try:
        after = second.client.get(f"/jobs/{job_id}").json()
        assert after["status"] == "running"
        assert after["progress"] >= before["progress"]
        assert after["partial"] is not None
        status = ended(second.client, job_id)
        assert status["status"] == "successful"
        assert status["created"] == before["created"]
        assert ended(second.client, waiting)["status"] == "successful"
        assert finishes(marker) == 1
    finally:
        second.stop()


def test_an_orderly_stop_hands_the_job_on(tmp_path: Path) -> None:
    marker, state = tmp_path / "marker", tmp_path / "state"
    first = Service(state, workers=1, attempts=1)
    job_id = under_way(first, marker, seconds=1.5)
    answers: list[httpx.Response] = []
    body = {"inputs": {"problem": {"title": "waits behind"}}}
    thread = threading.Thread(
        target=lambda: answers.append(
            httpx.post(f"{first.base}/processes/echo/execution", json=body, timeout=30)
        )
    )
    thread.start()
    time.sleep(0.3)
    began = time.monotonic()
    first.stop()
    thread.join()
    assert time.monotonic() - began < 4.0
    assert answers[0].status_code == 503
    assert answers[0].json()["type"] == OURS + "service-stopping"

    # One attempt is allowed, and the interrupted one does not count.
    second = Service(state, workers=1, attempts=1)
    try:
        assert ended(second.client, job_id)["status"] == "successful"
        assert finishes(marker) == 1
        assert ended(second.client, answers[0].json()["jobID"])["status"] == "successful"
    finally:
        second.stop()


@pytest.mark.slow
def test_a_job_under_which_the_service_keeps_dying_is_given_up(tmp_path: Path) -> None:
    state = tmp_path / "state"
    first = Service(state, workers=1, attempts=1)
    job_id = submit(first.client, "hang")
    wait_for(lambda: first.client.get(f"/jobs/{job_id}").json()["status"] == "running")
    first.kill()
    second = Service(state, workers=1, attempts=1)
    try:
        status = ended(second.client, job_id)
        assert status["exception"]["type"] == OURS + "worker-lost"
        assert second.client.get(f"/jobs/{job_id}/results").status_code == 500
        next_job_runs(second.client)
    finally:
        second.stop()


@pytest.mark.slow
def test_a_second_service_on_the_same_store_takes_over(tmp_path: Path) -> None:
    marker, database = tmp_path / "marker", f"sqlite:///{tmp_path / 'jobs.sqlite3'}"
    first = Service(tmp_path / "one", workers=1, database=database)
    second = Service(tmp_path / "two", workers=1, database=database)
    try:
        blocker = submit(second.client, "hang")
        wait_for(lambda: second.client.get(f"/jobs/{blocker}").json()["status"] == "running")
        under_way(first, marker, seconds=2)
        second.client.delete(f"/jobs/{blocker}")
        first.kill()
        status = second.client.get("/jobs?status=running").json()["jobs"][0]
        assert ended(second.client, status["jobID"])["status"] == "successful"
        assert finishes(marker) == 1
    finally:
        second.stop()
