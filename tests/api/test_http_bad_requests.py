"""Bad input is 400 with places, never 422, never 500, never echoed."""

import base64
import json
from collections.abc import Iterator
from typing import Any

import httpx
import pytest
from running import BODY_BYTES

URL = "/processes/echo/execution"
JSON = {"Content-Type": "application/json"}


def post(client: httpx.Client, body: bytes | str, **headers: str) -> httpx.Response:
    return client.post(URL, content=body, headers={**JSON, **headers})


def places(response: httpx.Response) -> list[str]:
    return [error["pointer"] for error in response.json()["errors"]]


@pytest.mark.parametrize(
    ("body", "pointer"),
    [
        ("", ""),
        ("  ", ""),
        ("[]", ""),
        ("null", ""),
        ("3", ""),
        ('"text"', ""),
        ("{", ""),
        ("{'inputs': {}}", ""),
        ('{"inputs": {}} {}', ""),
        ('{"inputs": {"problem": {"size": 1,}}}', ""),
        ('{"inputs": {"problem": {"size": NaN}}}', "/inputs/problem/size"),
        ('{"inputs": {"problem": {"size": -Infinity}}}', "/inputs/problem/size"),
        ('{"inputs": {"problem": {"holes": [1, 1e999]}}}', "/inputs/problem/holes/1"),
        ('{"inputs": {"problem": {"size": 1' + "0" * 400 + "}}}", "/inputs/problem/size"),
        ('{"inputs": {"problem": {"size": ' + "9" * 5000 + "}}}", "/inputs/problem/size"),
        ('{"inputs": {"problem": {"size": 1, "size": 2}}}', "/inputs/problem/size"),
        ('{"inputs": {}, "inputs": {}}', "/inputs"),
        ('{"inputs": {"problem": {"a/b~c": 1, "a/b~c": 2}}}', "/inputs/problem/a~1b~0c"),
        ('{"inputs": {"problem": {"title": "\\ud800"}}}', "/inputs/problem/title"),
        ('{"a": ' * 200 + "1" + "}" * 200, "/a" * 64),
        ("[" * 65 + "]" * 65, "/0" * 64),
        ('{"foo": "bar"}', "/foo"),
        ('{"inputs": []}', "/inputs"),
        ('{"inputs": {"other": 1}}', "/inputs/other"),
        ('{"inputs": {}, "outputs": []}', "/outputs"),
        ('{"inputs": {}, "outputs": {"other": {}}}', "/outputs/other"),
        ('{"inputs": {}, "outputs": {"result": 1}}', "/outputs/result"),
        (
            '{"inputs": {}, "outputs": {"result": {"transmissionMode": "reference"}}}',
            "/outputs/result/transmissionMode",
        ),
        (
            '{"inputs": {}, "outputs": {"result": {"format": {"mediaType": "text/csv"}}}}',
            "/outputs/result/format/mediaType",
        ),
        ('{"inputs": {}, "response": "xml"}', "/response"),
        ('{"inputs": {}, "subscriber": {"successUri": "https://a.example/"}}', "/subscriber"),
    ],
)
def test_bodies_that_cannot_be_used(client: httpx.Client, body: str, pointer: str) -> None:
    response = post(client, body)
    assert response.status_code == 400
    assert response.headers["content-type"] == "application/problem+json"
    assert response.json()["type"] == "urn:wellposed:problem:invalid-request"
    assert places(response) == [pointer]


def test_nesting_without_end(client: httpx.Client) -> None:
    response = post(client, "[" * 9000 + "]" * 9000)
    assert response.status_code == 400
    assert "nested" in response.json()["errors"][0]["detail"]


@pytest.mark.parametrize("body", [b"\xff\xfe{\x00}\x00", b'{"inputs": "\xe9"}', b"\x00", b"\x89PNG"])
def test_bytes_that_are_no_text(client: httpx.Client, body: bytes) -> None:
    response = post(client, body)
    assert response.status_code == 400
    assert places(response) == [""]


def test_a_byte_order_mark_is_overlooked(client: httpx.Client) -> None:
    assert post(client, b"\xef\xbb\xbf" + b'{"inputs": {}}').status_code == 200


def link(value: Any, media_type: str = "application/json") -> dict[str, str]:
    return {"href": f"data:{media_type};base64,{base64.b64encode(json.dumps(value).encode()).decode()}"}


@pytest.mark.parametrize(
    ("inputs", "pointers"),
    [
        ({"problem": 3}, ["/inputs/problem"]),
        ({"problem": {"size": True}}, ["/inputs/problem/size"]),
        ({"problem": {"size": "3"}}, ["/inputs/problem/size"]),
        ({"problem": {"value": {"size": "3"}}}, ["/inputs/problem/value/size"]),
        ({"problem": {"value": {"holes": [1, -1]}, "mediaType": "application/json"}},
         ["/inputs/problem/value/holes/1"]),
        ({"problem": {"holes": [-1, 0, -1], "x": 1}},
         ["/inputs/problem/x", "/inputs/problem/holes/0", "/inputs/problem/holes/2"]),
        ({"problem": {}, "seconds": "1"}, ["/inputs/seconds"]),
        ({"problem": {"size": "1"}, "seconds": {"value": "1"}},
         ["/inputs/problem/size", "/inputs/seconds/value"]),
        ({"problem": link({"size": "3"})}, ["/inputs/problem/href"]),
        ({"problem": link({}, "text/csv")}, ["/inputs/problem/href"]),
        ({"problem": {"href": "https://elsewhere.example/x.json"}}, ["/inputs/problem/href"]),
        ({"problem": {"href": "http://169.254.169.254/"}}, ["/inputs/problem/href"]),
        ({"problem": {"href": "file:///etc/passwd"}}, ["/inputs/problem/href"]),
        ({"problem": {"href": "data:application/json;base64,%%%"}}, ["/inputs/problem/href"]),
        ({"problem": {"href": "data:application/json,{"}}, ["/inputs/problem/href"]),
        ({"problem": {"href": 'data:application/json,{"size":NaN}'}}, ["/inputs/problem/href"]),
        ({"problem": {"href": 3}}, ["/inputs/problem/href"]),
        ({"problem": {"value": {}, "mediaType": "image/png"}}, ["/inputs/problem/mediaType"]),
        ({"problem": {"value": {}, "encoding": "base64"}}, ["/inputs/problem/encoding"]),
        ({"problem": {"value": {}, "format": {"mediaType": 1}}}, ["/inputs/problem/format/mediaType"]),
        ({"problem": {"value": {}, "format": {"colour": "red"}}}, ["/inputs/problem/format/colour"]),
        ({"problem": {"value": {}, "format": "json"}}, ["/inputs/problem/format"]),
    ],
)  # fmt: skip
def test_pointers_lead_into_the_request_as_sent(
    client: httpx.Client, inputs: dict[str, Any], pointers: list[str]
) -> None:
    body = {"inputs": inputs}
    response = client.post(URL, json=body)
    assert response.status_code == 400
    assert places(response) == pointers
    for pointer in pointers:
        target: Any = body
        for step in pointer.split("/")[1:]:
            target = target[int(step) if isinstance(target, list) else step]


def test_faults_of_envelope_and_inputs_come_together(client: httpx.Client) -> None:
    response = client.post(URL, json={"inputs": {"problem": {"size": "1"}, "y": 1}, "x": 1, "response": 2})
    assert places(response) == ["/x", "/response", "/inputs/y", "/inputs/problem/size"]


def test_what_is_in_the_data_is_named_in_the_detail(client: httpx.Client) -> None:
    response = client.post(URL, json={"inputs": {"problem": link({"holes": [0, -1]})}})
    assert "/holes/1" in response.json()["errors"][0]["detail"]


def test_input_is_never_echoed(client: httpx.Client) -> None:
    secret = "f2c9e0b1"
    for body in (
        {"inputs": {"problem": {"size": secret, "title": secret}}},
        {"inputs": {"problem": secret}},
        {"inputs": {"problem": {"href": f"https://{secret}.example"}}},
        {"inputs": {}, "response": secret},
    ):
        response = client.post(URL, json=body)
        assert response.status_code == 400
        assert secret not in response.text
    assert secret not in post(client, f'{{"inputs": {secret}}}').text
    assert secret not in client.get(f"/jobs/{secret}").text
    assert secret not in client.get("/jobs", params={"status": secret}).text


def test_long_names_and_many_faults_make_no_long_answer(client: httpx.Client) -> None:
    response = client.post(URL, json={"inputs": {"problem": {"n" * 10_000: 1}}})
    assert places(response) == ["/inputs/problem"]
    response = client.post(URL, json={"inputs": {"problem": {"holes": [-1] * 3000}}})
    assert len(places(response)) == 100


@pytest.mark.parametrize(
    ("media_type", "status"),
    [
        ("application/json", 200),
        ("application/json; charset=utf-8", 200),
        ("APPLICATION/JSON", 200),
        ("application/json; charset=latin-1", 415),
        ("text/plain", 415),
        ("application/xml", 415),
        ("application/x-www-form-urlencoded", 415),
        ("", 415),
    ],
)
def test_media_types(client: httpx.Client, media_type: str, status: int) -> None:
    assert (
        client.post(URL, content=b'{"inputs":{}}', headers={"Content-Type": media_type}).status_code == status
    )


def test_no_media_type_and_an_encoded_body(client: httpx.Client) -> None:
    assert client.post(URL, content=b'{"inputs":{}}').status_code == 415
    assert post(client, b"\x1f\x8b", **{"Content-Encoding": "gzip"}).status_code == 415


def chunks(count: int) -> Iterator[bytes]:
    for _ in range(count):
        yield b" " * 1000


def test_a_body_over_the_limit_announced_or_not(client: httpx.Client) -> None:
    assert post(client, b" " * (BODY_BYTES + 1)).status_code == 413
    response = client.post(URL, content=chunks(BODY_BYTES // 1000 + 1), headers=JSON)
    assert response.status_code == 413
    assert response.json()["type"] == "urn:wellposed:problem:body-too-large"
    padded = b'{"inputs":{}}'.ljust(BODY_BYTES)
    assert post(client, padded).status_code == 200


@pytest.mark.parametrize(
    ("accept", "expected"),
    [
        (None, "application/problem+json"),
        ("*/*", "application/problem+json"),
        ("application/problem+json", "application/problem+json"),
        ("application/*", "application/problem+json"),
        ("application/json", "application/json"),
        ("application/json, text/plain;q=0.5", "application/json"),
        ("application/json;q=0.9, application/problem+json", "application/problem+json"),
        ("application/json, */*;q=0.1", "application/json"),
        ("text/html", "application/problem+json"),
        ("application/json;q=oops", "application/problem+json"),
    ],
)
def test_the_media_type_of_errors_is_the_clients_choice(
    client: httpx.Client, accept: str | None, expected: str
) -> None:
    headers = {} if accept is None else {"Accept": accept}
    if accept is None:
        del client.headers["accept"]
    for response in (
        client.post(URL, content=b"[]", headers={**JSON, **headers}),
        client.get("/jobs/none", headers=headers),
        client.get("/processes/none", headers=headers),
    ):
        assert response.status_code in (400, 404)
        assert response.headers["content-type"] == expected


def test_three_kinds_of_404(client: httpx.Client) -> None:
    base = "http://www.opengis.net/def/exceptions/ogcapi-processes-1/1.0/"
    job = client.post(
        "/processes/echo/execution",
        json={"inputs": {"problem": {}, "seconds": 2}},
        headers={"Prefer": "respond-async"},
    ).json()["jobID"]
    for response, kind in (
        (client.get("/processes/none"), "no-such-process"),
        (client.post("/processes/none/execution", json={}), "no-such-process"),
        (client.get("/jobs/none"), "no-such-job"),
        (client.get("/jobs/00000000-0000-4000-8000-000000000000"), "no-such-job"),
        (client.get("/jobs/none/results"), "no-such-job"),
        (client.get("/jobs/none/results/result"), "no-such-job"),
        (client.delete("/jobs/none"), "no-such-job"),
        (client.get(f"/jobs/{job}/results"), "result-not-ready"),
        (client.get(f"/jobs/{job}/results/result"), "result-not-ready"),
    ):
        assert response.status_code == 404
        assert response.json()["type"] == base + kind
        assert response.json()["status"] == 404
    client.delete(f"/jobs/{job}")
