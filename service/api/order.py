"""The body of an execution request: inputs, outputs and the form of the response, checked."""

import hashlib
import threading
from collections import OrderedDict
from dataclasses import dataclass
from typing import Any

from service.api import reader, values
from service.errors import Fault, ProblemError
from service.jobs import canonical
from service.jobs.job import Request, Response
from service.processes.base import JSON, Process

_MEMBERS = ("inputs", "outputs", "response")


_MEMORIES = 32
_LONGEST_REMEMBERED = 128 * 1024


class Orders:
    """Reads orders; one that came before, byte for byte, is not checked all over again."""

    def __init__(self) -> None:
        self._lock = threading.Lock()
        self._read: OrderedDict[tuple[str, bytes], Request] = OrderedDict()

    def read(self, process: Process, body: bytes) -> Request:
        """As `read`, which is a function of its arguments alone."""
        key = process.id, hashlib.sha256(body).digest()
        with self._lock:
            known = self._read.get(key)
            if known is not None:
                self._read.move_to_end(key)
                return known
        request = read(process, body)
        if len(body) <= _LONGEST_REMEMBERED:
            with self._lock:
                self._read[key] = request
                while len(self._read) > _MEMORIES:
                    self._read.popitem(last=False)
        return request


@dataclass(frozen=True)
class _Envelope:
    response: Response
    outputs: tuple[str, ...]


def read(process: Process, body: bytes) -> Request:
    """What the client orders from ``process``.

    Raises ProblemError with every fault found, its pointer into the body as sent.
    """
    document = reader.parse(body)
    if not isinstance(document, dict):
        raise ProblemError(Fault("", "must be a JSON object with the member inputs"))
    faults: list[Fault] = []
    envelope = _envelope(process, document, faults)
    accepted = _accepted(process, document.get("inputs", {}), faults)
    if faults:
        raise ProblemError(*faults)
    return Request(
        process=process.id,
        inputs=accepted,
        response=envelope.response,
        outputs=envelope.outputs,
        digest=canonical.digest(process, accepted),
    )


def _envelope(process: Process, document: JSON, faults: list[Fault]) -> _Envelope:
    for name in document:
        if name == "subscriber":
            faults.append(Fault("/subscriber", "callbacks are not offered; poll the job instead"))
        elif name not in _MEMBERS:
            faults.append(Fault(reader.token(name), f"unknown member; known are {', '.join(_MEMBERS)}"))
    response = document.get("response", "raw")
    if response not in ("raw", "document"):
        faults.append(Fault("/response", "must be raw or document"))
    return _Envelope(response, _outputs(process, document.get("outputs", {}), faults))


def _outputs(process: Process, wanted: Any, faults: list[Fault]) -> tuple[str, ...]:
    if not isinstance(wanted, dict):
        faults.append(Fault("/outputs", "must be an object"))
        return ()
    for name, form in wanted.items():
        place = "/outputs" + reader.token(name)
        if name not in process.outputs:
            faults.append(Fault(place, f"unknown output; known are {', '.join(process.outputs)}"))
        elif not isinstance(form, dict):
            faults.append(Fault(place, "must be an object"))
        else:
            faults.extend(_form_faults(form, place))
    # An empty map says nothing in version 1.0 of the standard; it is read like an absent one.
    return tuple(name for name in process.outputs if not wanted or name in wanted)


def _form_faults(form: JSON, place: str) -> list[Fault]:
    faults = [
        Fault(place + reader.token(name), "unknown member")
        for name in form
        if name not in ("format", "transmissionMode")
    ]
    if form.get("transmissionMode", "value") != "value":
        faults.append(Fault(place + "/transmissionMode", "must be value"))
    if "format" in form:
        try:
            values.check_format(form["format"], place + "/format")
        except ProblemError as error:
            faults.extend(error.faults)
    return faults


def _accepted(process: Process, given: Any, faults: list[Fault]) -> JSON:
    if not isinstance(given, dict):
        faults.append(Fault("/inputs", "must be an object"))
        return {}
    known = {name: value for name, value in given.items() if name in process.inputs}
    for name in given.keys() - known.keys():
        detail = f"unknown input; known are {', '.join(process.inputs)}"
        faults.append(Fault("/inputs" + reader.token(name), detail))
    inputs, unreadable = values.plain(known)
    faults.extend(unreadable)
    if unreadable:
        return {}
    try:
        return process.accept(inputs.plain)
    except ProblemError as error:
        faults.extend(inputs.located(fault) for fault in error.faults)
        return {}
