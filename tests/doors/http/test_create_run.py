"""``POST /v1/runs``: what is accepted, what is refused, and in which words."""

import hashlib
import threading
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import pytest
from fastapi.testclient import TestClient

from service.doors.http.app import BODIES_MAX
from service.network.faults import Fault, Status
from service.network.files.media_types import NETWORK_TYPES, TABLE_TYPES
from service.runs.faults import (
    ChildCrashed,
    ChildMemory,
    ChildReleased,
    ChildTimeout,
    PlanTooLarge,
    StoreUnavailable,
)
from tests.doors.http.fakes import RUN_ID, FakeHouse, await_true, client_of, codes, fake_app

JSON = {"Content-Type": "application/json"}


@pytest.fixture
def house() -> FakeHouse:
    """Return use cases to be told what to answer."""
    return FakeHouse()


@pytest.fixture
def client(house: FakeHouse, tmp_path: Path) -> TestClient:
    """Return a client of the door over ``house``."""
    return client_of(fake_app(house, tmp_path))


def test_accepted_network_is_answered_with_its_run(house: FakeHouse, client: TestClient) -> None:
    """202, where to ask, and when: a client needs no documentation to go on."""
    answer = client.post("/v1/runs?label=evening", content=b'{"a": 1}', headers=JSON)

    assert answer.status_code == 202
    assert answer.headers["Location"] == f"/v1/runs/{RUN_ID}"
    assert int(answer.headers["Retry-After"]) >= 1
    document = answer.json()
    assert (document["id"], document["state"]) == (RUN_ID, "waiting")
    assert document["label"] == "evening"
    assert document["created_at"] == "2026-02-03T15:00:00.250000Z"
    assert document["links"]["plan"] is None
    assert house.bodies == [b'{"a": 1}']


def test_digest_is_taken_over_the_bytes_on_the_wire(house: FakeHouse, client: TestClient) -> None:
    """It will tell a repeated request from another one, whatever the bytes mean."""
    body = bytes(range(256)) * 20_000  # several pieces of the spool

    client.post("/v1/runs", content=body, headers={**JSON, "Content-Encoding": "gzip"})

    assert house.bodies == [body]
    assert house.encodings == ["gzip"]
    assert house.wire_digests == ["sha-256:" + hashlib.sha256(body).hexdigest()]


def test_nothing_is_left_of_a_body(client: TestClient, house: FakeHouse, tmp_path: Path) -> None:
    """Neither an accepted nor a refused body may fill the disk."""
    client.post("/v1/runs", content=b"{}", headers=JSON)
    house.error = ChildCrashed("died")
    client.post("/v1/runs", content=b"{}", headers=JSON)

    assert list((tmp_path / "spool").iterdir()) == []


@pytest.mark.parametrize(
    ("media_type", "status"),
    [
        ("application/json", 202),
        ("Application/JSON; charset=UTF-8", 202),
        ('application/json; charset="utf-8"', 202),
        ("application/json; charset=latin-1", 415),
        ("application/zip", 202),
        ("application/vnd.openxmlformats-officedocument.spreadsheetml.sheet", 202),
        ("application/zip; charset=utf-8", 415),
        # One table alone is no network.
        ("text/csv", 415),
        ("application/vnd.apache.parquet", 415),
        ("text/plain", 415),
        ("application/x-www-form-urlencoded", 415),
        ("", 415),
        (None, 415),
    ],
)
def test_only_forms_of_a_whole_network_are_read(
    client: TestClient, media_type: str | None, status: int
) -> None:
    """What a browser can send without asking first is refused, too: it is none of them."""
    headers = {} if media_type is None else {"Content-Type": media_type}

    answer = client.post("/v1/runs", content=b"{}", headers=headers)

    assert answer.status_code == status
    if status == 415:
        assert answer.json()["type"] == "/problems/unsupported-media-type"
        assert answer.headers["Accept"] == ", ".join(NETWORK_TYPES)
        assert ("a file for each table" in answer.json()["detail"]) == (media_type in TABLE_TYPES)


@pytest.mark.parametrize(
    ("encoding", "passed_on"),
    [
        ("gzip", "gzip"),
        ("ZSTD", "zstd"),
        ("identity", None),
        ("", None),
        ("br", "refused"),
        ("gzip, gzip", "refused"),
        ("gzip, zstd", "refused"),
    ],
)
def test_packed_bodies(
    client: TestClient, house: FakeHouse, encoding: str, passed_on: str | None
) -> None:
    """One packing of two kinds; packings on top of each other multiply what a bomb can do."""
    answer = client.post("/v1/runs", content=b"{}", headers={**JSON, "Content-Encoding": encoding})

    if passed_on == "refused":
        assert answer.status_code == 415
        assert answer.json()["type"] == "/problems/unsupported-encoding"
        assert answer.headers["Accept-Encoding"] == "gzip, zstd, identity"
        assert house.bodies == []
    else:
        assert answer.status_code == 202
        assert house.encodings == [passed_on]


def test_all_faults_of_query_and_headers_are_told_at_once(
    client: TestClient, house: FakeHouse
) -> None:
    """Nothing is ignored, and nobody has to send a body five times to learn five mistakes."""
    answer = client.post(
        "/v1/runs?shortages=perhaps&colour=red&fair_shares=yes&deadline_seconds=1.5",
        content=b"{}",
        headers={**JSON, "Idempotency-Key": "k1"},
    )

    assert answer.status_code == 422
    document = answer.json()
    assert document["type"] == "/problems/invalid-parameters"
    assert codes(document) == [
        ("?shortages", "bad_option"),
        ("?colour", "unknown_option"),
        ("?fair_shares", "not_yet"),
        ("?deadline_seconds", "bad_option"),
        ("Idempotency-Key:", "not_yet"),
    ]
    assert document["error_count"] == 5
    assert house.bodies == []


def test_idempotency_key_is_refused_by_name_until_it_is_built(client: TestClient) -> None:
    """A client that relies on it must not believe that its retries are safe."""
    answer = client.post("/v1/runs", content=b"{}", headers={**JSON, "Idempotency-Key": "k1"})

    assert answer.status_code == 422
    assert answer.json()["type"] == "/problems/not-yet"
    assert codes(answer.json()) == [("Idempotency-Key:", "not_yet")]


def test_doubled_option_is_refused(client: TestClient) -> None:
    """Of two values the service would have to guess one."""
    answer = client.post("/v1/runs?label=a&label=b", content=b"{}", headers=JSON)

    assert answer.status_code == 422
    assert codes(answer.json()) == [("?label", "doubled_parameter")]


@pytest.mark.parametrize("query", ["label=%ff", "&".join(f"p{n}=1" for n in range(101))])
def test_query_that_cannot_be_read_is_refused(client: TestClient, query: str) -> None:
    """A label must not come back with its bytes replaced, nor a thousand options be read."""
    answer = client.post(f"/v1/runs?{query}", content=b"{}", headers=JSON)

    assert answer.status_code == 400
    assert answer.json()["type"] == "/problems/unreadable-request"


@pytest.mark.parametrize(
    ("status", "http_status", "slug"),
    [
        (Status.UNREADABLE, 400, "unreadable-body"),
        (Status.TOO_LARGE, 413, "body-too-large"),
        (Status.INVALID, 422, "invalid-network"),
        (Status.UNSUPPORTED, 415, "unsupported-media-type"),
    ],
)
def test_refused_network_is_answered_with_its_faults(
    client: TestClient, house: FakeHouse, status: Status, http_status: int, slug: str
) -> None:
    """Each kind of refusal has its own status, and every fault its place, code and value."""
    house.status = status
    house.faults = (
        Fault(pointer="/lanes/0/origin", code="unknown_site", detail="No such site.", value="X"),
        Fault(pointer="/demand", code="missing", detail="Say it."),
    )
    house.fault_count = 1234

    answer = client.post("/v1/runs", content=b"{}", headers=JSON)

    assert answer.status_code == http_status
    assert answer.headers["Content-Type"] == "application/problem+json"
    document = answer.json()
    assert document["type"] == f"/problems/{slug}"
    assert document["errors"] == [
        {
            "pointer": "/lanes/0/origin",
            "code": "unknown_site",
            "detail": "No such site.",
            "value": "X",
        },
        {"pointer": "/demand", "code": "missing", "detail": "Say it.", "value": None},
    ]
    assert document["error_count"] == 1234
    assert house.wire_digests == []


@pytest.mark.parametrize(
    ("error", "status", "slug"),
    [
        (ChildMemory("x"), 413, "body-too-large"),
        (ChildTimeout("x"), 503, "busy"),
        (ChildReleased("x"), 503, "busy"),
        (ChildCrashed("secret"), 500, "internal"),
        (StoreUnavailable("secret"), 503, "busy"),
        (RuntimeError("secret"), 500, "internal"),
    ],
)
def test_failed_check_is_answered_with_a_problem(
    client: TestClient, house: FakeHouse, error: Exception, status: int, slug: str
) -> None:
    """Whatever happens in a child, the client gets a problem, and no detail of our mistakes."""
    house.error = error

    answer = client.post("/v1/runs", content=b"{}", headers=JSON)

    assert answer.status_code == status
    assert answer.headers["Content-Type"] == "application/problem+json"
    assert answer.json()["type"] == f"/problems/{slug}"
    assert answer.json()["request_id"] == answer.headers["X-Request-ID"]
    assert "secret" not in answer.text
    assert ("Retry-After" in answer.headers) == (status == 503)


@pytest.mark.parametrize(
    ("prefer", "applied"),
    [
        ("respond-async", "respond-async"),
        ("Respond-Async, wait=10", "respond-async"),
        ("wait=10", None),
        ("return=minimal", None),
        ("respond-async=maybe", None),
        (";;;", None),
    ],
)
def test_preference_applied_says_the_truth(
    client: TestClient, prefer: str, applied: str | None
) -> None:
    """Waiting is not built yet, so it is not said to have been done; no preference fails."""
    answer = client.post("/v1/runs", content=b"{}", headers={**JSON, "Prefer": prefer})

    assert answer.status_code == 202
    assert answer.headers.get("Preference-Applied") == applied


def test_declared_size_above_the_limit_is_refused_unread(tmp_path: Path) -> None:
    """Nothing of it is stored, and the client hears it before it has sent everything."""
    house = FakeHouse()
    client = client_of(fake_app(house, tmp_path, body_wire_bytes_max=1024))

    answer = client.post("/v1/runs", content=b" " * 1025, headers=JSON)

    assert answer.status_code == 413
    assert answer.json()["wire_bytes_max"] == 1024
    assert house.bodies == []


def test_body_of_exactly_the_limit_is_read(tmp_path: Path) -> None:
    """The limit is what may be sent, not the first size that may not."""
    house = FakeHouse()
    client = client_of(fake_app(house, tmp_path, body_wire_bytes_max=1024))

    assert client.post("/v1/runs", content=b" " * 1024, headers=JSON).status_code == 202


def test_too_many_bodies_at_once_are_told_to_come_back(house: FakeHouse, tmp_path: Path) -> None:
    """Bodies that wait for a check hold disk: beyond a number of them, 503 and no harm done."""
    house.intake_pause = threading.Event()
    client = client_of(fake_app(house, tmp_path))

    def post() -> int:
        return client.post("/v1/runs", content=b"{}", headers=JSON).status_code

    with client, ThreadPoolExecutor(BODIES_MAX) as pool:
        waiting = [pool.submit(post) for _ in range(BODIES_MAX)]
        spool = tmp_path / "spool"
        await_true(lambda: len(list(spool.glob("*/body"))) == BODIES_MAX)
        refused = client.post("/v1/runs", content=b"{}", headers=JSON)
        read = client.get("/healthz").status_code, client.get(f"/v1/runs/{RUN_ID}").status_code
        house.intake_pause.set()
        accepted = [future.result() for future in waiting]

    assert (refused.status_code, refused.json()["type"]) == (503, "/problems/busy")
    assert read == (200, 200)
    assert set(accepted) == {202}


def test_network_too_large_to_plan_is_refused_with_the_numbers(
    house: FakeHouse, client: TestClient
) -> None:
    """What was estimated, what is allowed, and the setting to change."""
    house.error = PlanTooLarge(estimated_bytes=9_000_000_000, allowed_bytes=8_000_000_000)

    answer = client.post("/v1/runs", content=b"{}", headers=JSON)

    document = answer.json()
    assert (answer.status_code, document["type"]) == (413, "/problems/plan-too-large")
    assert document["estimated_bytes"] == 9_000_000_000
    assert document["allowed_bytes"] == 8_000_000_000
    assert document["setting"] == "LANEWRIGHT_PLAN_MEMORY_BYTES_MAX"
