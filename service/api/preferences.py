"""The Prefer header (RFC 7240) of an execution request, and what of it was honoured."""

import re
from collections.abc import Sequence
from dataclasses import dataclass


@dataclass(frozen=True)
class Preferences:
    """What the client would like.

    respond_async : answer before the job has ended.
    wait : but only after so many seconds; None when nothing usable was said.
    """

    respond_async: bool = False
    wait: int | None = None


def parse(lines: Sequence[str]) -> Preferences:
    """From the values of the Prefer header lines; what is not known or not well formed is ignored."""
    found: dict[str, str] = {}
    for preference in ",".join(lines).split(","):
        name, _, value = preference.split(";")[0].partition("=")
        # The first mention counts.
        found.setdefault(name.strip().lower(), value.strip().strip('"'))
    wait = found.get("wait", "")
    seconds = int(wait) if re.fullmatch(r"[0-9]{1,9}", wait) else None
    return Preferences("respond-async" in found, seconds)
