"""Canonical JSON, and the digest that says when two requests are the same."""

import hashlib
import json
from typing import Any

from service import __version__
from service.processes.base import JSON, Process


def encode(value: Any) -> str:
    """The one text of a JSON value: ASCII, members sorted, no blanks.

    Raises ValueError for NaN and infinities, TypeError for what is not JSON.
    """
    return json.dumps(value, sort_keys=True, separators=(",", ":"), allow_nan=False)


def text(value: Any) -> str:
    """A JSON value as text, its members in the order they were given.

    Raises ValueError for NaN and infinities, TypeError for what is not JSON.
    """
    return json.dumps(value, separators=(",", ":"), allow_nan=False)


def digest(process: Process, inputs: JSON) -> str:
    """SHA-256 over process, versions and inputs, as ``sha256:<hex>``.

    ``inputs`` are those ``process.accept`` returned: defaults filled in, in canonical form.
    """
    subject = {
        "process": process.id,
        "process_version": process.version,
        "service_version": __version__,
        "inputs": inputs,
    }
    return "sha256:" + hashlib.sha256(encode(subject).encode("ascii")).hexdigest()
