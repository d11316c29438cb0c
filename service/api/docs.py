"""The page to read: what can be computed and how to ask for it, whole in one HTML document."""

import json
from collections.abc import Mapping
from html import escape
from importlib import resources
from string import Template

from service.processes.base import JSON, Process


def page(document: JSON, processes: Mapping[str, Process], example: str) -> str:
    """HTML made of an API definition (3.1), the processes and the text of an example request.

    It refers to nothing outside the service.
    """
    template = Template(resources.files("service.api").joinpath("static/docs.html").read_text("utf-8"))
    return template.substitute(
        version=escape(document["info"]["version"]),
        base=escape(document["servers"][0]["url"]),
        example=escape(example),
        processes="\n".join(_process(process) for process in processes.values()),
        operations="\n".join(
            _operation(path, method, described)
            for path, methods in document["paths"].items()
            for method, described in methods.items()
        ),
    )


def _process(process: Process) -> str:
    inputs = "".join(_described(name, each) for name, each in process.inputs.items())
    outputs = "".join(_described(name, each) for name, each in process.outputs.items())
    return (
        f"<section><h3><code>{escape(process.id)}</code> {escape(process.title)}</h3>"
        f"<p>{escape(process.description)}</p>"
        f"<h4>Inputs</h4><dl>{inputs}</dl><h4>Output</h4><dl>{outputs}</dl></section>"
    )


def _described(name: str, described: JSON) -> str:
    optional = "" if described.get("minOccurs", 1) > 0 else " <em>optional</em>"
    text = described.get("description") or described.get("title") or ""
    return (
        f"<dt><code>{escape(name)}</code>{optional}</dt><dd>{escape(text)}"
        f"<details><summary>schema</summary><pre>{escape(_json(described['schema']))}</pre></details></dd>"
    )


def _operation(path: str, method: str, described: JSON) -> str:
    parameters = "".join(
        f"<dt><code>{escape(each['name'])}</code> <em>in {escape(each['in'])}</em></dt>"
        f"<dd>{_marked(each['description'])}</dd>"
        for each in described.get("parameters", [])
    )
    responses = "".join(
        f"<dt><code>{escape(status)}</code></dt><dd>{_marked(each['description'])}</dd>"
        for status, each in described["responses"].items()
    )
    return (
        f"<section><h3><code>{method.upper()} {escape(path)}</code> {escape(described['summary'])}</h3>"
        f"<p>{_marked(described.get('description', ''))}</p>"
        + (f"<h4>Parameters</h4><dl>{parameters}</dl>" if parameters else "")
        + f"<h4>Answers</h4><dl>{responses}</dl></section>"
    )


def _marked(text: str) -> str:
    """Text in which backticks mark code."""
    pieces = escape(text).split("`")
    return "".join(f"<code>{piece}</code>" if number % 2 else piece for number, piece in enumerate(pieces))


def _json(value: JSON) -> str:
    return json.dumps(value, indent=2, ensure_ascii=False)
