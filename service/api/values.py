"""The value grammar of OGC API – Processes: values bare, qualified or by link, made plain.

Whatever form the client chose, a fault is reported at its place in the request as it was sent.
"""

import base64
import binascii
import re
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any
from urllib.parse import unquote_to_bytes

from service.api import reader
from service.api.media import JSON_TYPE
from service.errors import Fault, ProblemError
from service.processes.base import JSON

_QUALIFIED = {"value", "mediaType", "encoding", "schema", "format"}
_LINK = {"href", "type", "rel", "title", "hreflang"}
_DATA_URL = re.compile(r"data:([^,;]*)((?:;[^,;]*)*),(.*)", re.DOTALL | re.IGNORECASE)
_JSON_LIKE = re.compile(r"(application/(?:[\w.+-]+\+)?json|text/plain)?", re.IGNORECASE)


@dataclass(frozen=True)
class Inputs:
    """Plain inputs, and where each stands in the request.

    places : pointer to the plain value of each input.
    by_link : inputs that came inside a data URL, into which no pointer leads.
    """

    plain: JSON
    places: Mapping[str, str]
    by_link: frozenset[str]

    def located(self, fault: Fault) -> Fault:
        """``fault``, whose pointer starts at the plain inputs, with the pointer into the request."""
        name, _, rest = fault.pointer.removeprefix("/").partition("/")
        inside = f"/{rest}" if rest else ""
        place = self.places.get(name)
        if place is None:
            return Fault("/inputs" + fault.pointer, fault.detail)
        if name in self.by_link:
            where = f"in the data at {inside}: " if inside else "in the data: "
            return Fault(place, where + fault.detail)
        return Fault(place + inside, fault.detail)


def plain(inputs: Mapping[str, Any]) -> tuple[Inputs, list[Fault]]:
    """The plain values of all inputs that could be read, and the faults of those that could not."""
    values: JSON = {}
    places: dict[str, str] = {}
    by_link: set[str] = set()
    faults: list[Fault] = []
    for name, value in inputs.items():
        place = "/inputs" + reader.token(name)
        try:
            if _is_link(value):
                by_link.add(name)
                value, place = _fetched(value, place), place + "/href"
            elif _is_qualified(value):
                _check_qualifiers(value, place)
                value, place = value["value"], place + "/value"
        except ProblemError as error:
            faults.extend(error.faults)
            continue
        values[name], places[name] = value, place
    return Inputs(values, places, frozenset(by_link)), faults


def _is_qualified(value: Any) -> bool:
    return isinstance(value, dict) and "value" in value and value.keys() <= _QUALIFIED


def _is_link(value: Any) -> bool:
    return isinstance(value, dict) and "href" in value and value.keys() <= _LINK


def _check_qualifiers(value: JSON, place: str) -> None:
    # Some clients nest the qualifiers in a "format" object, some put them beside the value.
    check_format({name: value[name] for name in value.keys() - {"value", "format"}}, place)
    if "format" in value:
        check_format(value["format"], place + "/format")


def check_format(stated: Any, place: str) -> None:
    """Raise ProblemError unless a format object (``mediaType``, ``encoding``, ``schema``) means JSON."""
    if not isinstance(stated, dict):
        raise ProblemError(Fault(place, "must be an object"))
    for name, value in stated.items():
        if name == "schema":
            continue
        if not isinstance(value, str):
            raise ProblemError(Fault(place + reader.token(name), "must be a string"))
        if name == "mediaType" and not _JSON_LIKE.fullmatch(value.partition(";")[0].strip()):
            raise ProblemError(Fault(place + "/mediaType", f"must be {JSON_TYPE}"))
        if name == "encoding" and value.lower() not in ("utf-8", "utf8"):
            raise ProblemError(Fault(place + "/encoding", "must be UTF-8, or left out"))
        if name not in ("mediaType", "encoding"):
            raise ProblemError(Fault(place + reader.token(name), "unknown member"))


def _fetched(link: JSON, place: str) -> Any:
    href = link["href"]
    if not isinstance(href, str):
        raise ProblemError(Fault(place + "/href", "must be a string"))
    match = _DATA_URL.fullmatch(href)
    if match is None:
        raise ProblemError(
            Fault(place + "/href", "only data: URLs are read; this service fetches nothing from elsewhere")
        )
    media_type, parameters, data = match.groups()
    if not _JSON_LIKE.fullmatch(media_type.strip()):
        raise ProblemError(Fault(place + "/href", f"the data must be {JSON_TYPE}"))
    content = unquote_to_bytes(data)
    if parameters.lower().endswith(";base64"):
        try:
            content = base64.b64decode(content, validate=True)
        except binascii.Error:
            raise ProblemError(Fault(place + "/href", "the data is not base64")) from None
    try:
        return reader.parse(content)
    except ProblemError as error:
        faults = (
            Fault(place + "/href", f"in the data at {fault.pointer or 'its beginning'}: {fault.detail}")
            for fault in error.faults
        )
        raise ProblemError(*faults) from None
