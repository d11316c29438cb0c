"""The small parts of the jobs, one by one."""

import asyncio
import os
import subprocess
import sys
import threading
from pathlib import Path

import pytest
from running import STUBS

from service.errors import ComputationError
from service.jobs import bells, canonical, failures, machine, owner, partials, registry
from service.jobs.lifecycle import MOVES, State, progress_while_running
from service.jobs.logs import Logs


def test_nothing_computed_changes_a_job_that_has_ended() -> None:
    for name, move in MOVES.items():
        computing = name not in ("dismiss", "purge")
        assert not (computing and any(source.terminal for source in move.sources))
    assert all(State.DISMISSED not in move.sources for move in MOVES.values())
    reached = {move.target for move in MOVES.values()} | {State.ACCEPTED}
    assert reached == set(State)


@pytest.mark.parametrize(
    ("percent", "before", "shown"),
    [(0.0, 0, 0), (12.9, 0, 12), (40.0, 50, 50), (100.0, 20, 99), (1e9, 20, 99), (-5.0, 0, 0), (-5.0, 7, 7)],
)
def test_progress_never_falls_and_stays_below_100(percent: float, before: int, shown: int) -> None:
    assert progress_while_running(percent, before) == shown


def test_a_digest_depends_on_what_is_asked_and_not_on_its_order() -> None:
    processes = registry.processes(STUBS)
    echo, spin = processes["echo"], processes["spin"]
    inputs = {"a": 1, "b": {"c": [1.5, None], "d": "ü"}}
    again = {"b": {"d": "ü", "c": [1.5, None]}, "a": 1}
    digest = canonical.digest(echo, inputs)
    assert digest == canonical.digest(echo, again)
    assert digest.startswith("sha256:")
    assert len(digest) == 71
    others = [
        canonical.digest(spin, inputs),
        canonical.digest(echo, {**inputs, "a": 2}),
        canonical.digest(echo, {**inputs, "b": {"c": [None, 1.5], "d": "ü"}}),
    ]
    assert len({digest, *others}) == 4


@pytest.mark.parametrize("number", [float("nan"), float("inf"), float("-inf")])
def test_what_is_not_finite_is_not_written(number: float) -> None:
    for write in (canonical.text, canonical.encode):
        with pytest.raises(ValueError, match="not JSON compliant"):
            write({"a": [number]})


@pytest.mark.parametrize(
    ("document", "has"),
    [
        ({"constants": {"poincare": {"lower": 1.0, "upper": 2}}}, True),
        ({"constants": {"trace": {"outflow": {"lower": 0, "upper": 0.5}}}}, True),
        ({"table": [{"lower": 1, "upper": 2}]}, True),
        ({"constants": {}}, False),
        ({"constants": {"poincare": {"lower": 1.0, "upper": None}}}, False),
        ({"constants": {"poincare": {"lower": True, "upper": True}}}, False),
        ({"lower": 1.0}, False),
    ],
)
def test_which_partial_results_hold_something(document: dict[str, object], has: bool) -> None:
    assert partials.has_enclosure(document) is has


def test_a_result_cut_short_says_so() -> None:
    partial = {"target_met": False, "constants": {"a": {"lower": 1, "upper": 2}}, "warnings": ["first"]}
    result = partials.cut_short(partial, 12.0)
    assert result["target_met"] is False
    assert result["constants"] == partial["constants"]
    assert result["warnings"][0] == "first"
    assert "12 s" in result["warnings"][1]
    assert partial["warnings"] == ["first"]


def test_a_refusal_with_a_strange_status_is_the_services_fault() -> None:
    assert failures.refused(ComputationError("x", "X", "Do y.", 422))["status"] == 422
    assert failures.refused(ComputationError("x", "X", "Do y.", 200))["status"] == 500
    assert failures.refused(ComputationError("x", "X", "Do y."))["type"] == "urn:wellposed:problem:x"


def test_an_owner_is_dead_when_its_process_is_gone_and_never_when_it_cannot_be_seen() -> None:
    mine = owner.identity()
    assert owner.identity() != mine
    assert not owner.certainly_dead(mine)
    script = "from service.jobs import owner; print(owner.identity())"
    gone = subprocess.run(
        [sys.executable, "-c", script],
        capture_output=True,
        text=True,
        check=True,
        cwd=Path(__file__).parents[2],
    ).stdout.strip()
    assert owner.certainly_dead(gone)
    assert not owner.certainly_dead("another-" + gone)
    host, pid, _, random = mine.rsplit("|", 3)
    assert owner.certainly_dead(f"{host}|{pid}|12345.00|{random}")


def test_the_machine_grants_something_it_has() -> None:
    assert 1 <= machine.cores() <= (os.cpu_count() or 1)
    assert 2**26 < machine.memory() < 2**50


@pytest.mark.parametrize(
    ("quota", "cores"), [("150000 100000", 1), ("200000 100000", 2), ("50000 100000", 1), ("max 100000", 4)]
)
def test_a_containers_quota_counts(
    monkeypatch: pytest.MonkeyPatch, tmp_path: Path, quota: str, cores: int
) -> None:
    (tmp_path / "cpu.max").write_text(quota)
    (tmp_path / "memory.max").write_text("1048576")
    monkeypatch.setattr(machine, "_CGROUP", tmp_path)
    monkeypatch.setattr(os, "sched_getaffinity", lambda _: {0, 1, 2, 3})
    assert machine.cores() == cores
    assert machine.memory() == 1048576


def test_empty_logs_go_and_old_ones_too(tmp_path: Path) -> None:
    logs = Logs(tmp_path / "logs", retention=3600.0)
    for name, text in (("empty", ""), ("full", "a word"), ("old", "a word")):
        logs.path(name).write_text(text)
        logs.tidy(name)
    os.utime(logs.path("old"), (0, 0))
    logs.expire()
    assert [file.name for file in (tmp_path / "logs").iterdir()] == ["full.log"]


def test_a_bell_rings_from_another_thread_for_one_job_alone() -> None:
    tower = bells.Bells()

    async def wait() -> tuple[bool, bool]:
        with tower.listen("one") as one, tower.listen("other") as other:
            threading.Thread(target=tower.ring, args=("one",)).start()
            await asyncio.wait_for(one.wait(), 5.0)
            return one.is_set(), other.is_set()

    assert asyncio.run(wait()) == (True, False)
    # Nobody listens any more, and the loop has closed: no harm.
    tower.ring("one")
    tower.ring_all()
