"""The resources every client looks at first."""

import re

import httpx
import pytest
from running import Definition, Service

CONF = "http://www.opengis.net/spec/ogcapi-processes-1/1.0/conf/"
REL = "http://www.opengis.net/def/rel/ogc/1.0/"
GETS = ["/", "/conformance", "/api", "/openapi.json", "/docs", "/processes", "/processes/echo", "/jobs"]


def test_landing_page_links_to_everything(client: httpx.Client, service: Service) -> None:
    response = client.get("/")
    assert response.http_version == "HTTP/1.1"
    assert response.headers["content-type"] == "application/json"
    links = response.json()["links"]
    assert all({"href", "rel", "type"} <= link.keys() for link in links)
    related = {link["rel"] for link in links}
    assert {"self", "service-desc", "service-doc"} <= related
    assert {REL + name for name in ("conformance", "processes", "job-list")} <= related
    assert all(link["href"].startswith(service.base) for link in links)
    for link in links:
        assert client.get(link["href"]).status_code == 200


def test_the_definition_in_version_3_0_has_the_media_type_clients_look_for(client: httpx.Client) -> None:
    wanted = "application/vnd.oai.openapi+json;version=3.0"
    link = next(link for link in client.get("/").json()["links"] if link["type"] == wanted)
    assert client.get(link["href"]).headers["content-type"] == wanted


def test_conformance_names_the_classes_kept(client: httpx.Client) -> None:
    classes = client.get("/conformance").json()["conformsTo"]
    kept = {name.removeprefix(CONF) for name in classes if name.startswith(CONF)}
    assert kept == {"core", "json", "oas30", "ogc-process-description", "job-list", "dismiss"}


def test_a_process_is_listed_and_described(client: httpx.Client) -> None:
    listed = client.get("/processes", params={"limit": 100}).json()["processes"]
    summary = next(each for each in listed if each["id"] == "echo")
    assert summary["jobControlOptions"] == ["sync-execute", "async-execute", "dismiss"]
    assert summary["outputTransmission"] == ["value"]
    described = client.get("/processes/echo").json()
    assert described["inputs"]["problem"]["schema"] == {"type": "object"}
    assert list(described["outputs"]) == ["result"]
    assert REL + "execute" in {link["rel"] for link in described["links"]}


def test_walking_the_process_list_finds_each_once(client: httpx.Client) -> None:
    found: list[str] = []
    url = "/processes?limit=4"
    while url:
        page = client.get(url).json()
        assert len(page["processes"]) <= 4
        found += [process["id"] for process in page["processes"]]
        url = next((link["href"] for link in page["links"] if link["rel"] == "next"), "")
    assert len(found) == len(set(found)) == 14


@pytest.mark.parametrize("path", ["/processes", "/jobs"])
@pytest.mark.parametrize(
    ("limit", "status"),
    [("1", 200), ("1000", 200), ("99999", 200), ("9" * 25, 200)]
    + [(bad, 400) for bad in ("0", "-1", "abc", "", "1.5", "+1", "１", "1&limit=2")],
)
def test_limit(client: httpx.Client, path: str, limit: str, status: int) -> None:
    response = client.get(f"{path}?limit={limit}")
    assert response.status_code == status
    if limit == "1" and path == "/processes":
        assert len(response.json()["processes"]) == 1


def test_a_cursor_of_someone_elses_is_refused(client: httpx.Client) -> None:
    for cursor in ("abc", "WzFd", "é", "bnVsbA", "WyIxIl0"):
        assert client.get("/jobs", params={"cursor": cursor}).status_code == 400
    assert client.get("/processes", params={"cursor": "WyIxIl0"}).status_code == 400


@pytest.mark.parametrize("path", [*GETS, "/livez", "/readyz"])
def test_head_answers_like_get_without_a_body(client: httpx.Client, path: str) -> None:
    head, get = client.head(path), client.get(path)
    assert head.status_code == get.status_code == 200
    assert head.content == b""
    assert head.headers["content-type"] == get.headers["content-type"]
    assert head.headers["content-length"] == get.headers["content-length"]


@pytest.mark.parametrize("path", GETS[1:])
def test_a_slash_at_the_end_makes_no_difference(client: httpx.Client, path: str) -> None:
    response = client.get(path + "/")
    assert response.status_code == 200
    assert not response.history


@pytest.mark.parametrize(
    ("method", "path", "allow"),
    [
        ("POST", "/", "GET, HEAD"),
        ("PUT", "/jobs/x", "DELETE, GET, HEAD"),
        ("GET", "/processes/echo/execution", "POST"),
        ("DELETE", "/jobs", "GET, HEAD"),
    ],
)
def test_a_wrong_method_is_told_the_right_ones(
    client: httpx.Client, method: str, path: str, allow: str
) -> None:
    response = client.request(method, path)
    assert response.status_code == 405
    assert response.headers["allow"] == allow
    assert response.json()["status"] == 405


def test_an_unknown_path_is_a_problem_and_not_echoed(client: httpx.Client) -> None:
    response = client.get("/no/such-thing")
    assert response.status_code == 404
    assert response.headers["content-type"] == "application/problem+json"
    assert "such-thing" not in response.text


def test_the_page_to_read_loads_nothing_from_elsewhere(client: httpx.Client, service: Service) -> None:
    response = client.get("/docs")
    assert response.headers["content-type"].startswith("text/html")
    assert "<script" not in response.text
    loading = re.findall(r"""(?:src|href)=["']([^"']+)""", response.text)
    assert loading
    assert all(url.startswith(service.base) for url in loading)
    assert "/processes/{processID}/execution" in response.text


def test_links_follow_the_public_url(tmp_path_factory: pytest.TempPathFactory) -> None:
    public = "https://numbers.example/wellposed"
    running = Service(tmp_path_factory.mktemp("public") / "state", public_url=public, workers=1)
    try:
        links = running.client.get("/", headers={"Host": "evil.example"}).json()["links"]
        assert all(link["href"].startswith(public + "/") for link in links)
        response = running.client.post(
            "/processes/echo/execution", json={"inputs": {}}, headers={"Prefer": "respond-async"}
        )
        assert response.headers["location"].startswith(public + "/jobs/")
        assert running.client.get("/openapi.json").json()["servers"] == [{"url": public}]
    finally:
        running.stop()


def test_web_pages_may_call_only_from_the_origins_allowed(client: httpx.Client) -> None:
    assert (
        "access-control-allow-origin" not in client.get("/", headers={"Origin": "https://a.example"}).headers
    )


def test_it_is_alive_and_ready(client: httpx.Client, definition: Definition) -> None:
    assert client.get("/livez").json() == {"status": "ok"}
    assert client.get("/readyz").json() == {"status": "ok"}
