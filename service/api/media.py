"""JSON responses, and which media type an error is sent in."""

import json
from collections.abc import Mapping, Sequence
from typing import Any

from starlette.responses import Response

JSON_TYPE = "application/json"
PROBLEM_TYPE = "application/problem+json"


def json_response(
    value: Any, status: int = 200, headers: Mapping[str, str] | None = None, media_type: str = JSON_TYPE
) -> Response:
    """``value`` as UTF-8 JSON; the media type carries no parameter, for clients compare it as a string."""
    text = json.dumps(value, ensure_ascii=False, allow_nan=False, separators=(",", ":"))
    return Response(text.encode("utf-8"), status, headers, media_type)


def error_type(accept: Sequence[str]) -> str:
    """Media type of an error: problem+json, unless the client takes plain JSON and not that.

    accept : values of the Accept header lines.
    """
    ranges = _ranges(",".join(accept))
    if not ranges:
        return PROBLEM_TYPE
    problem, plain = _quality(PROBLEM_TYPE, ranges), _quality(JSON_TYPE, ranges)
    return JSON_TYPE if plain > problem else PROBLEM_TYPE


def _ranges(accept: str) -> dict[str, float]:
    ranges = {}
    for part in accept.split(","):
        name, *parameters = (piece.strip().lower() for piece in part.split(";"))
        quality = 1.0
        for parameter in parameters:
            if parameter.startswith("q="):
                try:
                    quality = float(parameter[2:])
                except ValueError:
                    quality = 0.0
        if name:
            ranges[name] = quality
    return ranges


def _quality(media_type: str, ranges: Mapping[str, float]) -> float:
    for name in (media_type, media_type.partition("/")[0] + "/*", "*/*"):
        if name in ranges:
            return ranges[name]
    return 0.0
