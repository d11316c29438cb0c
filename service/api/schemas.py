"""Schemas of what goes over the wire, in the dialect that OpenAPI 3.0 and JSON Schema share."""

from collections.abc import Mapping

from service.api.operation import ref
from service.jobs.lifecycle import State
from service.processes.base import JSON, Process

_STRING: JSON = {"type": "string"}
_STRINGS: JSON = {"type": "array", "items": _STRING}
_TIME: JSON = {"type": "string", "format": "date-time"}


def _object(required: list[str], **properties: JSON) -> JSON:
    return {"type": "object", "required": required, "properties": properties}


_LINKS: JSON = {"type": "array", "items": ref("link")}
_DESCRIPTION: JSON = {
    "type": "object",
    "required": ["schema"],
    "properties": {
        "title": _STRING,
        "description": _STRING,
        "minOccurs": {"type": "integer", "minimum": 0},
        "maxOccurs": {"anyOf": [{"type": "integer", "minimum": 1}, {"type": "string"}]},
        "schema": {"type": "object"},
    },
}
_SUMMARY: JSON = {
    "id": _STRING,
    "version": _STRING,
    "title": _STRING,
    "description": _STRING,
    "keywords": _STRINGS,
    "jobControlOptions": {
        "type": "array",
        "items": {"type": "string", "enum": ["sync-execute", "async-execute", "dismiss"]},
    },
    "outputTransmission": {"type": "array", "items": {"type": "string", "enum": ["value", "reference"]}},
    "links": _LINKS,
}
_SUMMARY_REQUIRED = ["id", "version", "jobControlOptions", "outputTransmission", "links"]

FIXED: dict[str, JSON] = {
    "link": _object(["href", "rel", "type"], href=_STRING, rel=_STRING, type=_STRING, title=_STRING),
    "landingPage": _object(["links"], title=_STRING, description=_STRING, links=_LINKS),
    "confClasses": _object(["conformsTo"], conformsTo=_STRINGS),
    "processSummary": _object(_SUMMARY_REQUIRED, **_SUMMARY),
    "processList": _object(
        ["processes", "links"], processes={"type": "array", "items": ref("processSummary")}, links=_LINKS
    ),
    "process": _object(
        [*_SUMMARY_REQUIRED, "inputs", "outputs"],
        **_SUMMARY,
        inputs={"type": "object", "additionalProperties": _DESCRIPTION},
        outputs={"type": "object", "additionalProperties": _DESCRIPTION},
    ),
    "statusInfo": _object(
        ["jobID", "id", "type", "processID", "status", "message", "progress", "created", "updated", "links"],
        jobID=_STRING,
        id=_STRING,
        type={"type": "string", "enum": ["process"]},
        processingEntityType=_STRING,
        processID=_STRING,
        status={"type": "string", "enum": [state.value for state in State]},
        message=_STRING,
        progress={"type": "integer", "minimum": 0, "maximum": 100},
        created=_TIME,
        started=_TIME,
        finished=_TIME,
        updated=_TIME,
        expires={**_TIME, "description": "After this the job and its results are deleted."},
        partial={
            "type": "object",
            "description": "The result so far, in the form of the result; its enclosures only ever narrow.",
        },
        exception=ref("exception"),
        links=_LINKS,
    ),
    "jobList": _object(["jobs", "links"], jobs={"type": "array", "items": ref("statusInfo")}, links=_LINKS),
    "exception": _object(
        ["type", "title", "status", "detail"],
        type={"type": "string", "description": "URI of the kind of problem."},
        title=_STRING,
        status={"type": "integer", "minimum": 400, "maximum": 599},
        detail=_STRING,
        instance=_STRING,
        errors={"type": "array", "items": ref("fault")},
        jobID={"type": "string", "description": "The job that goes on."},
        job={"type": "string", "description": "Address of the job that goes on."},
    ),
    "fault": _object(
        ["pointer", "detail"],
        pointer={"type": "string", "description": "JSON Pointer (RFC 6901) into the request body."},
        detail=_STRING,
    ),
    "health": _object(["status"], status=_STRING),
    "format": {
        "type": "object",
        "properties": {"mediaType": _STRING, "encoding": _STRING, "schema": {}},
        "additionalProperties": False,
    },
    "dataLink": {
        **_object(["href"], href={"type": "string", "pattern": "^[Dd][Aa][Tt][Aa]:"}, type=_STRING),
        "description": "A value inside a data: URL; nothing is fetched from elsewhere.",
    },
}


def of_processes(processes: Mapping[str, Process]) -> dict[str, JSON]:
    """Schemas of the requests and results of all processes, and of any of them."""
    schemas: dict[str, JSON] = {}
    for process in processes.values():
        schemas |= _of_process(process)
    schemas["execute"] = {"anyOf": [ref(f"{name}.execute") for name in processes]}
    schemas["result"] = {
        "anyOf": [ref(f"{name}.{output}") for name, each in processes.items() for output in each.outputs]
    }
    schemas["results"] = {
        "anyOf": [ref(f"{name}.results") for name in processes],
    }
    return schemas


def _of_process(process: Process) -> dict[str, JSON]:
    name = process.id
    schemas: dict[str, JSON] = {}
    inputs: dict[str, JSON] = {}
    for key, described in process.inputs.items():
        schemas[f"{name}.{key}"] = described["schema"]
        inputs[key] = _value(f"{name}.{key}", described)
    for key, described in process.outputs.items():
        schemas[f"{name}.{key}"] = described["schema"]
    required = [key for key, described in process.inputs.items() if described.get("minOccurs", 1) > 0]
    schemas[f"{name}.inputs"] = {**_closed(inputs), **({"required": required} if required else {})}
    schemas[f"{name}.execute"] = {
        **_closed(
            {
                "inputs": ref(f"{name}.inputs"),
                "outputs": _closed(dict.fromkeys(process.outputs, _OUTPUT)),
                "response": {"type": "string", "enum": ["raw", "document"], "default": "raw"},
            }
        ),
        "required": ["inputs"],
    }
    schemas[f"{name}.results"] = _object(
        list(process.outputs),
        **{key: _object(["value"], value=ref(f"{name}.{key}")) for key in process.outputs},
    )
    return schemas


_OUTPUT: JSON = {
    "type": "object",
    "additionalProperties": False,
    "properties": {
        "format": ref("format"),
        "transmissionMode": {"type": "string", "enum": ["value"], "default": "value"},
    },
}


def _closed(properties: dict[str, JSON]) -> JSON:
    return {"type": "object", "additionalProperties": False, "properties": properties}


def _value(schema: str, described: JSON) -> JSON:
    qualified = {
        **_closed(
            {
                "value": ref(schema),
                "mediaType": _STRING,
                "encoding": _STRING,
                "schema": {},
                "format": ref("format"),
            }
        ),
        "required": ["value"],
    }
    value: JSON = {name: described[name] for name in ("title", "description") if name in described}
    return {**value, "anyOf": [ref(schema), qualified, ref("dataLink")]}
