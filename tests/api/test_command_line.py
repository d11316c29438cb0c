"""Obstacles at the start are sentences, not tracebacks."""

import os
import socket
import subprocess
import sys
from pathlib import Path

import pytest
from running import STUBS

from service.__main__ import main

ROOT = Path(__file__).parents[2]


@pytest.fixture(autouse=True)
def settings(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    for name in [name for name in os.environ if name.startswith("WELLPOSED_")]:
        monkeypatch.delenv(name)
    monkeypatch.setenv("WELLPOSED_STATE", str(tmp_path / "state"))
    monkeypatch.setenv("WELLPOSED_PROCESSES", STUBS)


@pytest.mark.parametrize("name", ["serve", "demo"])
def test_missing_shared_libraries_are_named(tmp_path: Path, name: str) -> None:
    (tmp_path / "gmsh.py").write_text("raise OSError('libGLU.so.1: cannot open shared object file')\n")
    ended = subprocess.run(
        [sys.executable, "-m", "service", name],
        env={**os.environ, "PYTHONPATH": os.pathsep.join([str(tmp_path), str(ROOT)])},
        cwd=tmp_path,
        capture_output=True,
        text=True,
        timeout=60,
        check=False,
    )
    assert ended.returncode == 1
    assert "libGLU.so.1" in ended.stderr
    for package in ("libglu1-mesa", "libxft2", "libxinerama1", "libfontconfig1", "libgomp1"):
        assert package in ended.stderr
    assert "Traceback" not in ended.stderr


@pytest.mark.parametrize(
    ("name", "value", "code", "said"),
    [
        ("WORKERS", "0", 2, "workers"),
        ("PUBLIC_URL", "not a url", 2, "public_url"),
        ("DATABASE", "nosuch://x", 1, "WELLPOSED_DATABASE"),
        ("DATABASE", "not a url", 1, "WELLPOSED_DATABASE"),
        ("DATABASE", "mysql+nosuchdriver://x", 1, "WELLPOSED_DATABASE"),
        ("DATABASE", "sqlite:////proc/none/jobs.sqlite3", 1, "WELLPOSED_DATABASE"),
    ],
)
def test_settings_that_cannot_be_used(
    monkeypatch: pytest.MonkeyPatch,
    capsys: pytest.CaptureFixture[str],
    name: str,
    value: str,
    code: int,
    said: str,
) -> None:
    monkeypatch.setenv(f"WELLPOSED_{name}", value)
    assert main(["serve", "--port", "0"]) == code
    assert said in capsys.readouterr().err


def test_a_port_that_is_taken(capsys: pytest.CaptureFixture[str]) -> None:
    with socket.create_server(("127.0.0.1", 0)) as taken:
        port = str(taken.getsockname()[1])
        assert main(["serve", "--port", port]) == 1
    assert port in capsys.readouterr().err


def test_the_definition_is_written_and_found_stale(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    write = ["openapi", "--folder", str(tmp_path)]
    check = [*write, "--check"]
    assert main(check) == 1
    assert main(write) == 0
    assert main(check) == 0
    written = {str(file.relative_to(tmp_path)) for file in tmp_path.rglob("*.json")}
    examples = {
        f"examples/constants.{name}.json" for name in ("retention-basin", "unit-square", "geojson-field")
    }
    assert written == {"openapi-3.0.json", "openapi-3.1.json", *examples}
    definition = tmp_path / "openapi-3.1.json"
    definition.write_text(definition.read_text().replace("Wellposed", "Illposed", 1))
    capsys.readouterr()
    assert main(check) == 1
    said = capsys.readouterr().err
    assert "openapi-3.1.json" in said
    assert "openapi-3.0.json" not in said
