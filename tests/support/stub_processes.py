"""Processes for tests of jobs and HTTP: small, quick, and each able to go wrong in its own way."""

import ctypes
import os
import subprocess
import time
from collections.abc import Callable
from pathlib import Path

from service.errors import ComputationError, Fault, ProblemError
from service.processes.base import JSON, Limits, Process, Report

WARMED = {"calls": 0}


def warm() -> None:
    WARMED["calls"] += 1


def enclosures(target_met: bool, width: float = 0.1) -> JSON:
    return {
        "target_met": target_met,
        "constants": {
            "friedrichs": {"lower": 1.0, "upper": 1.0 + width, "unit": "m", "rigour": "guaranteed"}
        },
        "warnings": [],
        "provenance": {"warmed": WARMED["calls"], "pid": os.getpid()},
    }


def accept(inputs: JSON) -> JSON:
    faults = []
    problem = inputs.get("problem", {})
    if not isinstance(problem, dict):
        raise ProblemError(Fault("/problem", "must be an object"))
    for name in problem:
        if name not in ("title", "size", "holes"):
            faults.append(Fault(f"/problem/{name}", "unknown member"))
    size = problem.get("size", 1)
    if isinstance(size, bool) or not isinstance(size, int | float):
        faults.append(Fault("/problem/size", "must be a number"))
    for number, hole in enumerate(problem.get("holes", [])):
        if hole < 0:
            faults.append(Fault(f"/problem/holes/{number}", "must not be negative"))
    seconds = inputs.get("seconds", 0)
    if isinstance(seconds, bool) or not isinstance(seconds, int | float):
        faults.append(Fault("/seconds", "must be a number"))
    if faults:
        raise ProblemError(*faults)
    return {
        "problem": problem,
        "seconds": float(seconds),
        "limit": float(inputs.get("limit", 30)),
        "marker": inputs.get("marker", ""),
    }


def limits(inputs: JSON) -> Limits:
    return Limits(inputs["limit"], 1000)


def echo(inputs: JSON, report: Report) -> JSON:
    """Works for ``seconds``, reporting ten times; leaves a line in ``marker`` when done."""
    for step in range(10):
        if inputs["seconds"]:
            report(10 * step, f"step {step}", enclosures(False, 1.0 - step / 10))
            time.sleep(inputs["seconds"] / 10)
    if inputs["marker"]:
        with Path(inputs["marker"]).open("a") as file:
            file.write(f"{os.getpid()}\n")
    return enclosures(True) | {"echo": inputs["problem"]}


def spin(inputs: JSON, report: Report) -> JSON:
    """Burns a core for ever, with enclosures, and starts a process that would outlive it."""
    helper = subprocess.Popen(["sleep", "600"])
    Path(inputs["marker"]).write_text(f"{os.getpid()} {helper.pid}")
    report(40.0, "one enclosure", enclosures(False))
    while True:
        pass


def hang(inputs: JSON, report: Report) -> JSON:
    """Never returns and never had an enclosure."""
    report(5.0, "meshing", {"target_met": False, "constants": {}, "warnings": []})
    while True:
        time.sleep(1.0)


def hang_with_enclosures(inputs: JSON, report: Report) -> JSON:
    report(20.0, "level 1", enclosures(False))
    while True:
        time.sleep(1.0)


def hog(inputs: JSON, report: Report) -> JSON:
    """Uses more and more memory."""
    held = []
    while True:
        held.append(bytearray(b"x" * 2**23))
        time.sleep(0.005)


def grab(inputs: JSON, report: Report) -> JSON:
    """Asks for more memory at once than there is address space."""
    return {"size": len(bytearray(2**60))}


def crash(inputs: JSON, report: Report) -> JSON:
    report(30.0, "level 2", enclosures(False))
    ctypes.string_at(0)
    return {}


def refuse(inputs: JSON, report: Report) -> JSON:
    raise ComputationError(
        "domain-not-connected",
        "Domain not connected",
        "The domain consists of 2 pieces. Submit them one by one.",
    )


def bug(inputs: JSON, report: Report) -> JSON:
    print("a word on stdout")
    raise KeyError("a secret of the code")


def leave(inputs: JSON, report: Report) -> JSON:
    raise SystemExit(3)


def not_a_number(inputs: JSON, report: Report) -> JSON:
    return {"value": float("nan")}


def unmet(inputs: JSON, report: Report) -> JSON:
    return enclosures(False)


def _process(name: str, run: Callable[[JSON, Report], JSON], control: tuple[str, ...]) -> Process:
    return Process(
        id=name,
        title=name.capitalize(),
        description=(run.__doc__ or name).strip(),
        version="1.0.0",
        inputs={
            "problem": {"title": "Problem", "schema": {"type": "object"}},
            "seconds": {"title": "Seconds", "minOccurs": 0, "schema": {"type": "number", "nullable": True}},
            "limit": {"title": "Limit", "minOccurs": 0, "schema": {"type": "number"}},
            "marker": {"title": "Marker", "minOccurs": 0, "schema": {"type": "string"}},
        },
        outputs={"result": {"title": "Result", "schema": {"type": "object"}}},
        accept=accept,
        run=run,
        limits=limits,
        job_control=control,
    )


_BOTH = ("sync-execute", "async-execute", "dismiss")

PROCESSES = {
    process.id: process
    for process in [
        _process("echo", echo, _BOTH),
        _process("echo-sync", echo, ("sync-execute",)),
        _process("echo-async", echo, ("async-execute", "dismiss")),
        _process("spin", spin, _BOTH),
        _process("hang", hang, _BOTH),
        _process("hang-with-enclosures", hang_with_enclosures, _BOTH),
        _process("hog", hog, _BOTH),
        _process("grab", grab, _BOTH),
        _process("crash", crash, _BOTH),
        _process("refuse", refuse, _BOTH),
        _process("bug", bug, _BOTH),
        _process("leave", leave, _BOTH),
        _process("not-a-number", not_a_number, _BOTH),
        _process("unmet", unmet, _BOTH),
    ]
}
