"""Obstacles at the start are sentences, not tracebacks."""

import os
import socket
import subprocess
import sys
from pathlib import Path

import pytest
from running import STUBS

ROOT = Path(__file__).parents[2]
SUPPORT = ROOT / "tests" / "support"


def command(
    *arguments: str, folder: Path, path: tuple[Path, ...] = (), **settings: str
) -> subprocess.CompletedProcess[str]:
    environment = {name: text for name, text in os.environ.items() if not name.startswith("WELLPOSED_")}
    environment["PYTHONPATH"] = os.pathsep.join(map(str, (*path, ROOT, SUPPORT)))
    environment |= {"WELLPOSED_STATE": str(folder / "state"), "WELLPOSED_PROCESSES": STUBS}
    environment |= {f"WELLPOSED_{name.upper()}": value for name, value in settings.items()}
    return subprocess.run(
        [sys.executable, "-m", "service", *arguments],
        env=environment,
        cwd=folder,
        capture_output=True,
        text=True,
        timeout=60,
        check=False,
    )


@pytest.mark.parametrize("name", ["serve", "demo"])
def test_missing_shared_libraries_are_named(tmp_path: Path, name: str) -> None:
    fake = tmp_path / "fake"
    fake.mkdir()
    (fake / "gmsh.py").write_text("raise OSError('libGLU.so.1: cannot open shared object file')\n")
    ended = command(name, folder=tmp_path, path=(fake,))
    assert ended.returncode == 1
    assert "libGLU.so.1" in ended.stderr
    for package in ("libglu1-mesa", "libxft2", "libxinerama1", "libfontconfig1", "libgomp1"):
        assert package in ended.stderr
    assert "Traceback" not in ended.stderr


@pytest.mark.parametrize(
    ("settings", "code", "said"),
    [
        ({"workers": "0"}, 2, "workers"),
        ({"public_url": "not a url"}, 2, "public_url"),
        ({"database": "nosuch://x"}, 1, "WELLPOSED_DATABASE"),
        ({"database": "sqlite:////proc/none/jobs.sqlite3"}, 1, "WELLPOSED_DATABASE"),
    ],
)
def test_settings_that_cannot_be_used(tmp_path: Path, settings: dict[str, str], code: int, said: str) -> None:
    ended = command("serve", "--port", "0", folder=tmp_path, **settings)
    assert ended.returncode == code
    assert said in ended.stderr
    assert "Traceback" not in ended.stderr


def test_a_port_that_is_taken(tmp_path: Path) -> None:
    with socket.create_server(("127.0.0.1", 0)) as taken:
        port = str(taken.getsockname()[1])
        ended = command("serve", "--port", port, folder=tmp_path)
    assert ended.returncode == 1
    assert port in ended.stderr
    assert "Traceback" not in ended.stderr


def test_the_definition_is_written_and_found_stale(tmp_path: Path) -> None:
    assert command("openapi", "--check", folder=tmp_path).returncode == 1
    assert command("openapi", folder=tmp_path).returncode == 0
    assert command("openapi", "--check", folder=tmp_path).returncode == 0
    written = sorted(file.name for file in (tmp_path / "openapi").rglob("*.json"))
    assert {"openapi-3.0.json", "openapi-3.1.json", "constants.retention-basin.json"} <= set(written)
    definition = tmp_path / "openapi" / "openapi-3.1.json"
    definition.write_text(definition.read_text().replace("Wellposed", "Illposed", 1))
    stale = command("openapi", "--check", folder=tmp_path)
    assert stale.returncode == 1
    assert "openapi-3.1.json" in stale.stderr
    assert "openapi-3.0.json" not in stale.stderr
