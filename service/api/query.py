"""Query parameters read strictly: exact numbers, lists in both styles, instants, cursors."""

import base64
import binascii
import json
import re
from collections.abc import Collection
from datetime import UTC, datetime
from typing import Any

from starlette.datastructures import QueryParams

from service.api.problems import invalid_parameter, unknown_parameter

_DATE = re.compile(r"[0-9]{4}-[0-9]{2}-[0-9]{2}")
_DATE_TIME = re.compile(
    _DATE.pattern + r"T[0-9]{2}:[0-9]{2}:[0-9]{2}(\.[0-9]+)?(Z|[+-][0-9]{2}:[0-9]{2})", re.IGNORECASE
)


def only(query: QueryParams, known: tuple[str, ...]) -> None:
    """Raise HTTPProblemError (400) when a parameter is not among ``known``."""
    if any(name not in known for name in query):
        raise unknown_parameter(known)


def single(query: QueryParams, name: str) -> str | None:
    """The parameter's value, None when absent; given twice it is an error."""
    found = query.getlist(name)
    if len(found) > 1:
        raise invalid_parameter(name, "may be given once")
    return found[0] if found else None


def several(query: QueryParams, name: str, known: Collection[str] | None = None) -> tuple[str, ...]:
    """The parameter's values, whether repeated or separated by commas, each among ``known``."""
    found = tuple(item for value in query.getlist(name) for item in value.split(","))
    if any(not item for item in found):
        raise invalid_parameter(name, "has an empty value")
    if known is not None and any(item not in known for item in found):
        raise invalid_parameter(name, f"must be one of {', '.join(known)}")
    return found


def limit(query: QueryParams, default: int, most: int) -> int:
    """Number of items on a page; more than ``most`` is read as ``most``."""
    text = single(query, "limit")
    if text is None:
        return default
    if not re.fullmatch(r"[0-9]{1,30}", text) or int(text) < 1:
        raise invalid_parameter("limit", "must be an integer, 1 or more")
    return min(int(text), most)


def seconds(query: QueryParams, name: str) -> float | None:
    """A duration in whole seconds, None when absent."""
    text = single(query, name)
    if text is None:
        return None
    if not re.fullmatch(r"[0-9]{1,12}", text):
        raise invalid_parameter(name, "must be a number of seconds, an integer")
    return float(text)


def interval(query: QueryParams, name: str) -> tuple[float | None, float | None]:
    """An instant or an interval ``a/b`` with open ends (``..`` or empty), as seconds since the epoch."""
    text = single(query, name)
    if text is None:
        return None, None
    parts = text.split("/")
    if len(parts) > 2:
        raise invalid_parameter(name, "must be an instant or two separated by a slash")
    if len(parts) == 1:
        return _instant(name, text, 0), _instant(name, text, 1)
    first, last = (
        None if part in ("", "..") else _instant(name, part, end) for end, part in enumerate(parts)
    )
    if first is not None and last is not None and first > last:
        raise invalid_parameter(name, "ends before it begins")
    return first, last


def _instant(name: str, text: str, end: int) -> float:
    # A blank can only be a plus sign that was not encoded.
    text = text.replace(" ", "+").upper()
    whole_day = bool(_DATE.fullmatch(text))
    try:
        if not whole_day and not _DATE_TIME.fullmatch(text):
            raise ValueError
        instant = datetime.fromisoformat(text)
    except ValueError:
        detail = "must be made of RFC 3339 instants such as 2026-12-01T08:00:00Z"
        raise invalid_parameter(name, detail) from None
    if whole_day:
        instant = instant.replace(tzinfo=UTC)
    # A day lasts until the next, a stated second until the next second.
    span = 86400.0 if whole_day else 1.0 if instant.microsecond == 0 else 0.001
    return instant.timestamp() + (span - 1e-6 if end else 0.0)


def cursor(*place: Any) -> str:
    """An opaque text for the place where the next page begins."""
    return base64.urlsafe_b64encode(json.dumps(place).encode("ascii")).decode("ascii").rstrip("=")


def place(query: QueryParams, kinds: tuple[type, ...]) -> tuple[Any, ...] | None:
    """What `cursor` was given, its items of the stated kinds; None when there is no cursor."""
    text = single(query, "cursor")
    if text is None:
        return None
    try:
        found = json.loads(base64.urlsafe_b64decode(text.encode("ascii") + b"=" * (-len(text) % 4)))
    except (ValueError, binascii.Error):
        found = None
    if not isinstance(found, list) or tuple(type(item) for item in found) != kinds:
        raise invalid_parameter("cursor", "is none that this service gave out")
    return tuple(found)
