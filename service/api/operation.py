"""Describes an operation for the API definition, beside the handler that performs it."""

from collections.abc import Mapping, Sequence

from service.api.media import JSON_TYPE, PROBLEM_TYPE
from service.processes.base import JSON

_ERRORS = {
    400: "The request is not valid; `errors` says what and where.",
    404: "There is nothing of that id, or its results are not ready; `type` says which.",
    410: "The job was dismissed.",
    413: "The body is larger than the service takes.",
    415: "The body is not JSON in UTF-8.",
    422: "The job failed: the numbers refused the problem; `type` and `detail` say why and what to change.",
    500: "The service or the process that computed the job failed.",
    502: "The job failed for want of something it depends on.",
    503: "The service goes down, or its job store does not answer.",
    504: "The job failed for lack of time, or goes on after a synchronous request has waited long enough.",
    507: "The job failed for lack of memory.",
}


def ref(schema: str) -> JSON:
    """A reference to a schema of the definition."""
    return {"$ref": f"#/components/schemas/{schema}"}


def answer(
    description: str, schema: JSON, media_type: str = JSON_TYPE, headers: Mapping[str, str] | None = None
) -> JSON:
    """A successful response; ``headers`` maps names to what they say."""
    response: JSON = {"description": description, "content": {media_type: {"schema": schema}}}
    if headers:
        response["headers"] = {
            name: {"description": text, "schema": {"type": "string"}} for name, text in headers.items()
        }
    return response


def parameter(
    name: str, description: str, schema: JSON, *, where: str = "query", required: bool = False
) -> JSON:
    """A parameter in the path, the query or the header."""
    return {
        "name": name,
        "in": where,
        "description": description,
        "required": required,
        "schema": schema,
    }


def operation(
    identifier: str,
    tag: str,
    answers: Mapping[int, JSON],
    errors: Sequence[int] = (),
    parameters: Sequence[JSON] = (),
    body: JSON | None = None,
) -> JSON:
    """An operation object without its summary and description, which are the handler's docstring."""
    responses = {str(status): response for status, response in answers.items()}
    problem = {media: {"schema": ref("exception")} for media in (PROBLEM_TYPE, JSON_TYPE)}
    for status in sorted({*errors, 500}):
        responses[str(status)] = {"description": _ERRORS[status], "content": problem}
    described: JSON = {"operationId": identifier, "tags": [tag], "responses": responses}
    if parameters:
        described["parameters"] = list(parameters)
    if body is not None:
        described["requestBody"] = body
    return described
