"""Who may come in, and what every answer carries."""

import re
from pathlib import Path

import pytest
from fastapi.testclient import TestClient
from structlog.testing import capture_logs

from service.doors.http.problem_kinds import KINDS
from service.doors.http.security import ADDRESS_BYTES_MAX, HEADER_BYTES_MAX
from tests.doors.http.fakes import RUN_ID, FakeHouse, client_of, fake_app


@pytest.fixture
def house() -> FakeHouse:
    """Return use cases to be told what to answer."""
    return FakeHouse()


@pytest.fixture
def client(house: FakeHouse, tmp_path: Path) -> TestClient:
    """Return a client of the door over ``house``."""
    return client_of(fake_app(house, tmp_path))


@pytest.mark.parametrize(
    ("host", "status"),
    [
        ("127.0.0.1:8080", 200),
        ("localhost:8080", 200),
        ("LOCALHOST:8080", 200),
        ("[::1]:8080", 200),
        ("127.0.0.1", 421),
        ("127.0.0.1:8081", 421),
        ("localhost.attacker.example:8080", 421),
        ("attacker.example", 421),
        ("127.0.0.1:8080@attacker.example", 421),
        ("127.0.0.2:8080", 421),
        ("", 421),
    ],
)
def test_only_this_machine_by_its_own_names(client: TestClient, host: str, status: int) -> None:
    """A name that an attacker lets point to the loopback must not open the door."""
    answer = client.get("/healthz", headers={"Host": host})

    assert answer.status_code == status
    if status == 421:
        assert answer.json()["type"] == "/problems/wrong-host"
        assert answer.headers["X-Request-ID"] == answer.json()["request_id"]


@pytest.mark.parametrize(
    ("origin", "status"),
    [
        ("http://127.0.0.1:8080", 202),
        ("http://localhost:8080", 202),
        ("http://127.0.0.1:9000", 403),
        ("https://attacker.example", 403),
        ("null", 403),
    ],
)
def test_page_of_another_origin_cannot_post(
    client: TestClient, house: FakeHouse, origin: str, status: int
) -> None:
    """The browser sends such a request also without asking; the service must refuse it."""
    headers = {"Origin": origin, "Content-Type": "application/json"}

    answer = client.post("/v1/runs", content=b"{}", headers=headers)

    assert answer.status_code == status
    assert len(house.bodies) == (1 if status == 202 else 0)


def test_browser_is_not_told_that_it_may_ask(client: TestClient) -> None:
    """A preflight gets no permission, so no other page can send JSON."""
    headers = {"Origin": "http://127.0.0.1:8080", "Access-Control-Request-Method": "POST"}

    answer = client.options("/v1/runs", headers=headers)

    assert answer.status_code == 405
    assert not [name for name in answer.headers if name.startswith("access-control")]


def test_huge_headers_are_refused_with_a_problem(client: TestClient) -> None:
    """431, and the next request is served."""
    answer = client.get("/healthz", headers={"X-Padding": "x" * HEADER_BYTES_MAX})

    assert (answer.status_code, answer.json()["type"]) == (431, "/problems/headers-too-large")
    assert client.get("/healthz").status_code == 200


def test_long_address_is_refused_with_a_problem(client: TestClient) -> None:
    """414, before the query is taken apart."""
    answer = client.post("/v1/runs?label=" + "x" * ADDRESS_BYTES_MAX, content=b"{}")

    assert (answer.status_code, answer.json()["type"]) == (414, "/problems/address-too-long")


@pytest.mark.parametrize("given", ["abc-123", "a" * 64, "9.~_"])
def test_request_id_of_the_client_is_kept(client: TestClient, given: str) -> None:
    """So that both sides' logs can be read together."""
    with capture_logs() as lines:
        answer = client.get("/nowhere", headers={"X-Request-ID": given})

    assert answer.headers["X-Request-ID"] == given
    assert answer.json()["request_id"] == given
    assert [line["event"] for line in lines] == ["request"]


@pytest.mark.parametrize("given", ["", "a" * 65, "a b", "a\tb", '{"a":1}', "ä".encode("latin-1")])
def test_request_id_that_could_do_harm_is_replaced(client: TestClient, given: str | bytes) -> None:
    """What goes into logs and headers is a word and nothing else."""
    answer = client.get(
        "/healthz", headers={b"X-Request-ID": given if isinstance(given, bytes) else given.encode()}
    )

    assert re.fullmatch("[0-9a-f]{32}", answer.headers["X-Request-ID"])


def test_every_request_is_logged_once_without_its_content(client: TestClient) -> None:
    """Path, status and duration; neither query nor body, which hold what is not for logs."""
    with capture_logs() as lines:
        client.post("/v1/runs?label=private", content=b'{"private": 1}')

    (line,) = lines
    assert (line["method"], line["path"], line["status"]) == ("POST", "/v1/runs", 415)
    assert line["problem"] == "unsupported-media-type"
    assert "private" not in repr(line)


@pytest.mark.parametrize("path", ["/healthz", "/nowhere", "/docs", f"/v1/runs/{RUN_ID}/plan"])
def test_every_answer_carries_the_headers_that_protect(client: TestClient, path: str) -> None:
    """Also those that are problems, and also plans, which hold texts from outside."""
    answer = client.get(path)

    assert answer.headers["X-Content-Type-Options"] == "nosniff"
    assert answer.headers["Content-Security-Policy"].startswith("default-src 'self';")
    assert "frame-ancestors 'none'" in answer.headers["Content-Security-Policy"]


@pytest.mark.parametrize(
    "path",
    [
        "/nowhere",
        "/v1/runs/",
        "/v1",
        "/docs/",
        "/static/nothing.js",
        "/static/../app.py",
        "/static/%2e%2e/app.py",
    ],
)
def test_nothing_is_there(client: TestClient, path: str) -> None:
    """404 as a problem; no redirect for a slash too many, and no file from outside of static."""
    answer = client.get(path)

    assert answer.status_code == 404
    assert answer.json()["type"] in {"/problems/not-found", "/problems/run-unknown"}


@pytest.mark.parametrize(
    ("method", "path", "allow"),
    [
        ("GET", "/v1/runs", "POST"),
        ("DELETE", "/v1/runs", "POST"),
        ("POST", f"/v1/runs/{RUN_ID}", "GET, HEAD"),
        ("PUT", f"/v1/runs/{RUN_ID}/plan", "GET, HEAD"),
        ("POST", "/healthz", "GET, HEAD"),
        ("BREW", "/healthz", "GET, HEAD"),
    ],
)
def test_method_that_a_resource_does_not_have(
    client: TestClient, method: str, path: str, allow: str
) -> None:
    """405 says in Allow what it has."""
    answer = client.request(method, path)

    assert (answer.status_code, answer.json()["type"]) == (405, "/problems/method-not-allowed")
    assert answer.headers["Allow"] == allow


def test_liveness_asks_nobody(client: TestClient, house: FakeHouse) -> None:
    """A process whose database is away lives; to restart it would not bring that back."""
    house.missing = ["the database"]
    house.error = RuntimeError("nobody may ask")

    assert client.get("/healthz").json() == {"alive": True}


def test_readiness_says_what_is_missing(client: TestClient, house: FakeHouse) -> None:
    """503 with a list, for whoever has to mend it."""
    ready = client.get("/readyz")
    house.missing = ["the database has no tables: run lanewright migrate"]
    missing = client.get("/readyz")

    assert (ready.status_code, ready.json()) == (200, {"ready": True})
    assert missing.status_code == 503
    assert missing.json()["missing"] == house.missing


@pytest.mark.parametrize("slug", KINDS)
def test_every_kind_of_problem_has_its_page(client: TestClient, slug: str) -> None:
    """The ``type`` of a problem is an address that explains it."""
    kind = KINDS[slug]

    page = client.get(kind.address)

    assert page.status_code == 200
    assert page.headers["Content-Type"].startswith("text/html")
    assert str(kind.status) in page.text
    assert kind.address in client.get("/problems").text


def test_page_of_no_problem_is_not_found(client: TestClient) -> None:
    """Nobody may be told of a kind that does not exist."""
    assert client.get("/problems/no-such").status_code == 404
