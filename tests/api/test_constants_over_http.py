"""The real process over a real socket: every example request, in every way it can be asked for."""

import json
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import httpx
import pytest
from owslib.ogcapi.processes import Processes
from running import Definition, Service, ended

from service.demo.examples import examples

ROOT = Path(__file__).parents[2]
REAL = "service.processes.registry:PROCESSES"
URL = "/processes/constants/execution"


@pytest.fixture(scope="module")
def real(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Service]:
    running = Service(tmp_path_factory.mktemp("real") / "state", processes=REAL, workers=1)
    yield running
    running.stop()


@pytest.fixture(scope="module")
def checked(real: Service) -> Iterator[httpx.Client]:
    hooks = {"response": [Definition(real.base).check]}
    with httpx.Client(
        base_url=real.base, timeout=60.0, trust_env=False, verify=False, event_hooks=hooks
    ) as client:
        yield client


def result_of(response: httpx.Response) -> dict[str, Any]:
    assert response.status_code == 200, response.text
    document = response.json()
    return document["result"]["value"] if "result" in document else document


@pytest.mark.parametrize("name", sorted(examples()))
def test_every_example_is_answered_with_proved_enclosures(checked: httpx.Client, name: str) -> None:
    request = examples()[name]
    result = result_of(checked.post(f"/processes/{name.partition('.')[0]}/execution", json=request))
    assert result["target_met"] is True
    assert result["constants"]
    tolerance = request["inputs"]["tolerance"]
    wanted = tolerance["value"] if isinstance(tolerance, dict) else tolerance
    for constant in result["constants"].values():
        assert 0 < constant["lower"] <= constant["upper"]
        assert constant["relative_width"] <= wanted
        assert constant["rigour"] == "guaranteed"


def test_the_committed_examples_are_those_of_the_package() -> None:
    committed = {
        file.stem: json.loads(file.read_text()) for file in (ROOT / "openapi/examples").glob("*.json")
    }
    assert committed == examples()


def test_the_committed_definition_is_not_stale() -> None:
    check = [sys.executable, "-m", "service", "openapi", "--check"]
    ended = subprocess.run(check, cwd=ROOT, capture_output=True, text=True, check=False)
    assert ended.returncode == 0, ended.stderr


def test_the_standards_client_gets_the_enclosure(real: Service) -> None:
    client = Processes(real.base)
    described = client.process("constants")
    assert "problem" in described["inputs"]
    inputs = examples()["constants.unit-square"]["inputs"]
    result = client.execute("constants", {**inputs, "problem": {"value": inputs["problem"]}})
    friedrichs = result["result"]["value"]["constants"]["friedrichs"]
    assert friedrichs["lower"] <= 0.2250790790392765 <= friedrichs["upper"]  # 1 / (pi sqrt 2)


def test_pointers_of_the_real_problem_document(checked: httpx.Client) -> None:
    request = json.loads(json.dumps(examples()["constants.geojson-field"]))
    request["inputs"]["problem"]["value"]["boundary"][0]["condition"] = "dirichlte"
    response = checked.post(URL, json=request)
    assert response.status_code == 400
    pointers = [error["pointer"] for error in response.json()["errors"]]
    assert pointers == ["/inputs/problem/value/boundary/0/condition"]


def test_a_domain_in_two_pieces_fails_the_job_with_advice(checked: httpx.Client) -> None:
    squares = [[[[x, 0], [x + 1, 0], [x + 1, 1], [x, 1], [x, 0]]] for x in (0, 3)]
    problem = {"domain": {"shape": {"type": "MultiPolygon", "coordinates": squares}}}
    problem["boundary"] = [{"name": "rim", "on": "remainder", "condition": "dirichlet"}]
    response = checked.post(URL, json={"inputs": {"problem": problem}}, headers={"Prefer": "respond-async"})
    status = ended(checked, response.json()["jobID"])
    assert status["status"] == "failed"
    results = checked.get(f"/jobs/{status['jobID']}/results")
    assert 400 < results.status_code < 500
    assert results.json()["type"] == status["exception"]["type"]
    assert "piece" in results.json()["detail"]


def test_the_demo_runs_from_nothing_to_enclosures(tmp_path: Path) -> None:
    run = subprocess.run(
        [sys.executable, "-m", "service", "demo"],
        cwd=ROOT,
        capture_output=True,
        text=True,
        check=False,
        timeout=60,
    )
    assert run.returncode == 0, run.stderr
    for words in (
        "Accepted as job",
        "Friedrichs constant",
        "Poincaré constant",
        "between",
        "licensed engineer",
    ):
        assert words in run.stdout
    assert " m  (proved" in run.stdout
    assert run.stderr == ""
