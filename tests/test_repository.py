"""The repository keeps to what was agreed: what lies where, and what stands nowhere."""

import fnmatch
import re
import subprocess
import tomllib
from pathlib import Path

import pytest

from service import __main__ as command_line

ROOT = Path(__file__).parents[1]

TOP_LEVEL = {"README.md", "DEVELOPERS.md", "pyproject.toml", "service", "tests", "openapi", "docker"}

# In halves, so that this file does not hold what it looks for.
UNFINISHED = re.compile(r"\b(TO" + r"DO|FIX" + r"ME|XX" + r"X)\b")
MACHINE_PATH = re.compile(r"/(wo" + r"rk|ro" + r"ot|ho" + r"me|Us" + r"ers)/\w")
HOST = re.compile(r"https?://([\w.-]+\w)")

HOSTS = (
    "127.0.0.1",
    "localhost",
    "169.254.169.254",  # an address that a test has the service refuse to ask
    "*.example",
    "www.opengis.net",
    "json-schema.org",
    "spec.openapis.org",
    "spdx.org",
    "www.gnu.org",
    "fsf.org",
)
"""Hosts that may be named: this machine, examples, and the homes of open standards and of the licence."""


@pytest.fixture(scope="module")
def committed() -> list[Path]:
    """Every file that git knows; without git, every file under the agreed names."""
    try:
        listed = subprocess.run(["git", "ls-files", "-z"], cwd=ROOT, capture_output=True, text=True, check=True)
        files = [ROOT / name for name in listed.stdout.split("\0") if name]
    except (OSError, subprocess.CalledProcessError):
        files = [file for name in TOP_LEVEL for file in [ROOT / name, *(ROOT / name).rglob("*.*")]]
        files = [file for file in files if "__pycache__" not in file.parts]
    return [file for file in files if file.is_file()]


def test_nothing_else_at_the_top(committed: list[Path]) -> None:
    names = {file.relative_to(ROOT).parts[0] for file in committed}
    assert {name for name in names if not name.startswith(".")} <= TOP_LEVEL


@pytest.mark.parametrize("pattern", [UNFINISHED, MACHINE_PATH])
def test_words_that_stand_nowhere(committed: list[Path], pattern: re.Pattern[str]) -> None:
    found = [
        f"{file.relative_to(ROOT)}:{number}: {line.strip()[:100]}"
        for file in committed
        for number, line in enumerate(file.read_text(encoding="utf-8").splitlines(), 1)
        if pattern.search(line)
    ]
    assert not found


def test_no_hosts_but_those_of_standards(committed: list[Path]) -> None:
    strange = {
        f"{file.relative_to(ROOT)}: {host}"
        for file in committed
        for host in HOST.findall(file.read_text(encoding="utf-8"))
        if not any(fnmatch.fnmatch(host, known) for known in HOSTS)
    }
    assert not strange


def test_the_set_up_script_installs_what_the_service_asks_for() -> None:
    script = (ROOT / "docker/setup.sh").read_text(encoding="utf-8")
    stated = re.search(r'^packages="([^"]*)"', script, re.MULTILINE)
    assert stated is not None
    assert stated.group(1).replace("\\\n", "").split() == command_line._PACKAGES.split()


def test_every_data_file_is_packaged(committed: list[Path]) -> None:
    configuration = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))
    patterns = configuration["tool"]["setuptools"]["package-data"]["service"]
    data = [
        file.relative_to(ROOT / "service").as_posix()
        for file in committed
        if file.is_relative_to(ROOT / "service") and file.suffix != ".py"
    ]
    assert data
    assert not [name for name in data if not any(fnmatch.fnmatch(name, pattern) for pattern in patterns)]


def test_the_map_of_the_code_names_modules_that_exist() -> None:
    text = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")
    rooms = re.split(r"^### `(service/[\w/]*)`", text, flags=re.MULTILINE)[1:]
    mapped = {
        room: set(re.findall(r"^- `(\w+\.py)`", modules, re.MULTILINE))
        for room, modules in zip(rooms[::2], rooms[1::2], strict=True)
    }
    for room, modules in mapped.items():
        assert modules <= {file.name for file in (ROOT / room).glob("*.py")}, room
    packages = {f"{file.parent.relative_to(ROOT).as_posix()}/" for file in (ROOT / "service").rglob("__init__.py")}
    assert set(mapped) == packages


def test_files_named_to_developers_exist() -> None:
    text = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8").partition("## Every module in a line")[0]
    for name in re.findall(r"`([\w/]+/(?:\w+\.\w+)?)`", text):
        assert (ROOT / name).exists() or (ROOT / "service" / name).exists(), name
