"""Reads request bodies: bounded in size, and JSON in the strict sense, each fault with its place."""

import json
import math
import re
from collections import Counter, deque
from dataclasses import dataclass
from typing import Any

from starlette.requests import Request

from service.api.media import JSON_TYPE
from service.api.problems import HTTPProblemError
from service.errors import Fault, ProblemError
from service.jobs.failures import problem

DEPTH = 64
"""Arrays and objects nested deeper than this are refused."""

_MOST_FAULTS = 100
_SURROGATE = re.compile(r"\\u[dD][89a-fA-F]")


async def body(request: Request, limit: int) -> bytes:
    """The body of a request that says it is JSON, of at most ``limit`` bytes.

    Raises HTTPProblemError: 413 when it is longer, whether or not its length was announced; 415 when it is
    of another media type or encoded.
    """
    _check_media_type(request)
    announced = request.headers.get("content-length", "")
    if announced.isdigit() and int(announced) > limit:
        raise _too_large(limit)
    received = bytearray()
    async for chunk in request.stream():
        received += chunk
        if len(received) > limit:
            raise _too_large(limit)
    return bytes(received)


def parse(body: bytes) -> Any:
    """The JSON value in ``body``; all numbers finite, no member twice, strings free of lone surrogates.

    Raises ProblemError with a pointer to each fault.
    """
    if not body.strip():
        raise ProblemError(Fault("", "the body is empty; it must be a JSON object"))
    try:
        text = body.decode("utf-8-sig")
        value = json.loads(
            text,
            object_pairs_hook=_object,
            parse_float=_float,
            parse_int=_int,
            parse_constant=lambda _: _Bad("NaN and Infinity are not JSON"),
        )
    except UnicodeDecodeError:
        raise ProblemError(Fault("", "the body is not UTF-8")) from None
    except json.JSONDecodeError as error:
        place = f"line {error.lineno}, column {error.colno}"
        raise ProblemError(Fault("", f"the body is not JSON: {error.msg} at {place}")) from None
    except RecursionError:
        raise ProblemError(Fault("", _TOO_DEEP)) from None
    faults = _faults(value, look_at_strings=_SURROGATE.search(text) is not None)
    if faults:
        raise ProblemError(*faults)
    return value


def token(name: object) -> str:
    """A member name or index as one step of a JSON Pointer (RFC 6901), slash included."""
    text = str(name).encode("utf-8", "replace").decode("utf-8")
    return "/" + text.replace("~", "~0").replace("/", "~1")


_TOO_DEEP = f"arrays and objects are nested deeper than {DEPTH} levels"


@dataclass(frozen=True)
class _Bad:
    detail: str


class _Doubled(dict[str, Any]):
    """An object in which the member ``name`` is given twice."""

    name: str


def _object(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
    members = dict(pairs)
    if len(members) == len(pairs):
        return members
    counts = Counter(name for name, _ in pairs)
    doubled = _Doubled(members)
    doubled.name = counts.most_common(1)[0][0]
    return doubled


def _float(text: str) -> float | _Bad:
    number = float(text)
    return number if math.isfinite(number) else _Bad("the number is too large")


def _int(text: str) -> int | _Bad:
    # 309 digits are beyond the range of a double, and long conversions take quadratic time.
    if len(text) < 310:
        number = int(text)
        try:
            float(number)
            return number
        except OverflowError:
            pass
    return _Bad("the number is too large")


def _faults(value: Any, *, look_at_strings: bool) -> list[Fault]:
    faults: list[Fault] = []
    pending: deque[tuple[Any, str, int]] = deque([(value, "", 0)])
    while pending and len(faults) < _MOST_FAULTS:
        item, pointer, depth = pending.popleft()
        if isinstance(item, _Bad):
            faults.append(Fault(pointer, item.detail))
        elif isinstance(item, dict | list):
            if depth == DEPTH:
                faults.append(Fault(pointer, _TOO_DEEP))
                continue
            if isinstance(item, _Doubled):
                faults.append(Fault(pointer + token(item.name), "the member is given more than once"))
            entries = item.items() if isinstance(item, dict) else enumerate(item)
            for name, entry in entries:
                if look_at_strings and isinstance(name, str) and _lone(name):
                    faults.append(Fault(pointer + token(name), "the name is not valid Unicode"))
                if isinstance(entry, _Bad | dict | list) or (look_at_strings and isinstance(entry, str)):
                    pending.append((entry, pointer + token(name), depth + 1))
        elif look_at_strings and isinstance(item, str) and _lone(item):
            faults.append(Fault(pointer, "the string is not valid Unicode"))
    return faults


def _lone(text: str) -> bool:
    try:
        text.encode("utf-8")
    except UnicodeEncodeError:
        return True
    return False


def _check_media_type(request: Request) -> None:
    name, *parameters = (part.strip().lower() for part in request.headers.get("content-type", "").split(";"))
    charsets = [part.partition("=")[2].strip('"') for part in parameters if part.startswith("charset=")]
    coding = request.headers.get("content-encoding", "identity").strip().lower()
    if name != JSON_TYPE or any(charset not in ("utf-8", "utf8", "us-ascii") for charset in charsets):
        raise _unsupported(f"Send the body as {JSON_TYPE} in UTF-8, with a Content-Type header that says so.")
    if coding != "identity":
        raise _unsupported("Send the body without Content-Encoding.")


def _unsupported(detail: str) -> HTTPProblemError:
    return HTTPProblemError(problem("unsupported-media-type", "Unsupported media type", 415, detail))


def _too_large(limit: int) -> HTTPProblemError:
    return HTTPProblemError(
        problem("body-too-large", "Body too large", 413, f"The body may have at most {limit} bytes."),
        {"Connection": "close"},
    )
