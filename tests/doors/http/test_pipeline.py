"""The whole house over HTTP: real children, a real store, and bodies of every evil kind."""

import gzip
import hashlib
import itertools
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path

import orjson
import pytest
import zstandard
from fastapi.testclient import TestClient
from httpx2 import Response

from service.doors.http.app import create_app
from service.main import working_application
from service.settings import Settings
from tests.doors.http.fakes import await_true, client_of, codes

EXAMPLE = (Path(__file__).parents[3] / "openapi" / "examples" / "network.json").read_bytes()
MEBIBYTE = 2**20
UNPACKED_BYTES_MAX = 64 * MEBIBYTE


@dataclass(frozen=True, slots=True, kw_only=True)
class House:
    """A service with everything in it, as a client sees it."""

    client: TestClient
    folder: Path

    def post(self, body: bytes, *, query: str = "", encoding: str | None = None) -> Response:
        """Post a network."""
        headers = {"Content-Type": "application/json"}
        if encoding is not None:
            headers["Content-Encoding"] = encoding
        return self.client.post(f"/v1/runs{query}", content=body, headers=headers)

    def finished(self, answer: Response) -> dict[str, str]:
        """Return the run that was accepted with ``answer``, once it is final."""
        assert answer.status_code == 202, answer.text
        path = answer.headers["Location"]

        def final() -> bool:
            state = self.client.get(path).json()["state"]
            return state not in {"waiting", "running"}

        await_true(final, seconds=30)
        document: dict[str, str] = self.client.get(path).json()
        return document


@pytest.fixture(scope="module")
def house(tmp_path_factory: pytest.TempPathFactory) -> Iterator[House]:
    """Start a service for the tests of this file: each leaves it as it found it."""
    folder = tmp_path_factory.mktemp("house")
    settings = Settings(
        data=folder,
        body_wire_bytes_max=8 * MEBIBYTE,
        body_unpacked_bytes_max=UNPACKED_BYTES_MAX,
    )
    with (
        working_application(settings) as application,
        client_of(create_app(application, settings)) as client,
    ):
        yield House(client=client, folder=folder)


def plain(body: bytes) -> bytes:
    """Return ``body`` as it is."""
    return body


@pytest.mark.parametrize(
    ("encoding", "pack"),
    [(None, plain), ("gzip", gzip.compress), ("zstd", zstandard.compress)],
)
def test_network_in_any_packing_becomes_the_same_plan(
    house: House, encoding: str | None, pack: Callable[[bytes], bytes]
) -> None:
    """The main job, end to end; the amounts are those derived in the comments."""
    run = house.finished(house.post(pack(EXAMPLE), encoding=encoding, query="?label=evening"))

    assert run["state"] == "planned"
    assert run["request_digest"] == "sha-256:" + hashlib.sha256(EXAMPLE).hexdigest()
    plan = house.client.get(f"/v1/runs/{run['id']}/plan").json()
    # 1000 bags for 880 (priority 2) and 5 pallets of 40 (priority 4): 880 and 120 are served, 80
    # are short. 800 go by L1, all that it holds; 80 and 120 over the hub. Transport 800 * 0.215 +
    # 200 * 0.11 + 80 * 0.13 + 120 * 0.16 = 223.6, handling 1000 * 0.04 + 200 * 0.02 = 44.
    assert plan["total_cost"] == "267.6"
    assert plan["cost_parts"]["transport"] == "223.6"
    assert plan["cost_parts"]["handling"] == "44"
    assert [line["short"] for line in plan["order_lines"]] == ["0", "80"]
    assert house.client.get(f"/v1/runs/{run['id']}/network?form=received").content == EXAMPLE


def test_evidence_is_found_intact_by_its_own_program(house: House, tmp_path: Path) -> None:
    """What a stranger gets is checked by plain Python, in a process that knows nothing of us."""
    run = house.finished(house.post(EXAMPLE))
    path = tmp_path / "evidence.zip"
    path.write_bytes(house.client.get(f"/v1/runs/{run['id']}/evidence").content)
    program = tmp_path / "unpacked"
    subprocess.run([sys.executable, "-m", "zipfile", "-e", path, program], check=True)

    verified = subprocess.run(
        [sys.executable, "-I", program / "verify.py", path],
        check=False,
        capture_output=True,
        cwd=tmp_path,
    )

    assert (verified.returncode, verified.stderr) == (0, b"")


def test_history_tells_what_happened(house: House) -> None:
    """From submission to finish, in a chain."""
    run = house.finished(house.post(EXAMPLE))

    events = house.client.get(f"/v1/runs/{run['id']}/history").json()["events"]

    assert [entry["event"]["kind"] for entry in events] == ["submitted", "claimed", "finished"]
    for former, latter in itertools.pairwise(events):
        assert latter["event"]["previous"] == former["event"]["hash"]


def test_network_without_a_plan_is_a_run_not_an_error(house: House) -> None:
    """Where shortages are forbidden, 1000 bags for 1080 have no plan, and that is the answer."""
    run = house.finished(house.post(EXAMPLE, query="?shortages=forbid"))

    assert run["state"] == "no_plan"
    plan = house.client.get(f"/v1/runs/{run['id']}/plan").json()
    assert plan["status"] == "no_plan"
    assert plan["reason"]["items"]


def nested(depth: int) -> bytes:
    """Return JSON nested ``depth`` deep."""
    return b"[" * depth + b"]" * depth


def bomb(pack: Callable[[bytes], bytes]) -> bytes:
    """Return a body that unpacks to a byte more than may be."""
    return pack(b" " * (UNPACKED_BYTES_MAX + 1))


ZSTD = zstandard.ZstdCompressor()
WHOLE_GZIP = gzip.compress(EXAMPLE)
WHOLE_ZSTD = ZSTD.compress(EXAMPLE)


@pytest.mark.parametrize(
    ("body", "encoding", "status"),
    [
        pytest.param(b"", None, 400, id="empty"),
        pytest.param(b"\x00\xff\xfe", None, 400, id="bytes"),
        pytest.param(b"{", None, 400, id="torn"),
        pytest.param(EXAMPLE[:-10], None, 400, id="cut"),
        pytest.param(EXAMPLE + b"x", None, 400, id="more-behind"),
        pytest.param(b"\xef\xbb\xbf" + EXAMPLE[:5], None, 400, id="mark"),
        pytest.param(EXAMPLE.decode().encode("utf-16"), None, 400, id="utf-16"),
        pytest.param(EXAMPLE.replace(b"Yard 7", b"Yard \xff"), None, 400, id="not-utf-8"),
        pytest.param(EXAMPLE.replace(b'"1000"', b"NaN"), None, 400, id="nan"),
        pytest.param(EXAMPLE, "gzip", 400, id="not-gzip"),
        pytest.param(EXAMPLE, "zstd", 400, id="not-zstd"),
        pytest.param(WHOLE_GZIP[:-20], "gzip", 400, id="torn-gzip"),
        pytest.param(WHOLE_ZSTD[:-20], "zstd", 400, id="torn-zstd"),
        pytest.param(WHOLE_GZIP[:-8] + b"\0" * 8, "gzip", 400, id="gzip-checksum"),
        pytest.param(nested(100_000), None, 400, id="nested-100000"),
        pytest.param(b'{"a":' * 100_000, None, 400, id="nested-and-torn"),
        pytest.param(nested(17), None, 400, id="nested-17"),
        pytest.param(bomb(gzip.compress), "gzip", 413, id="gzip-bomb"),
        pytest.param(bomb(ZSTD.compress), "zstd", 413, id="zstd-bomb"),
        pytest.param(gzip.compress(gzip.compress(EXAMPLE)), "gzip", 400, id="gzip-twice"),
        pytest.param(b"null", None, 422, id="null"),
        pytest.param(b"[]", None, 422, id="array"),
        pytest.param(b'"text"', None, 422, id="text"),
        pytest.param(b"1e999", None, 422, id="number"),
        pytest.param(b"{}", None, 422, id="empty-object"),
        pytest.param(b'{"format": 1, "format": 1}', None, 422, id="doubled-key"),
        pytest.param(b'{"lanes": {"origin": [1, null, {}]}}', None, 422, id="wrong-kinds"),
    ],
)
def test_evil_body_is_refused_and_the_service_lives(
    house: House, body: bytes, encoding: str | None, status: int
) -> None:
    """A problem with the right status, nothing stored, nothing left, the next body is served."""
    began = time.monotonic()

    answer = house.post(body, encoding=encoding)

    assert answer.status_code == status, answer.text[:500]
    assert answer.headers["Content-Type"] == "application/problem+json"
    document = answer.json()
    assert document["errors"]
    assert document["error_count"] >= len(document["errors"])
    assert time.monotonic() - began < 20
    assert list((house.folder / "spool").iterdir()) == []
    assert house.post(EXAMPLE).status_code == 202


def test_every_fault_is_told_with_its_place(house: House) -> None:
    """Several mistakes in several tables, in one answer."""
    network = orjson.loads(EXAMPLE)
    network["lanes"][0]["origin"] = "NOWHERE"
    network["demand"][1]["quantity"] = "-1"
    network["colour"] = "red"
    network["control"]["lane_rows"] = 5

    answer = house.post(orjson.dumps(network))

    assert answer.status_code == 422
    document = answer.json()
    assert {pointer for pointer, _ in codes(document)} >= {
        "/lanes/0/origin",
        "/demand/1/quantity",
        "/colour",
        "/control/lane_rows",
    }


def test_what_is_not_built_is_refused_by_name(house: House) -> None:
    """It is said that it is not built yet; it is never ignored."""
    network = orjson.loads(EXAMPLE)
    network["lanes"][0]["distance_km"] = 1

    answer = house.post(orjson.dumps(network))

    assert answer.status_code == 422
    assert codes(answer.json()) == [("/lanes/0/distance_km", "not_yet")]


def test_check_out_of_memory_is_told_as_too_large(tmp_path: Path) -> None:
    """413, not a dead service: the limit is that of the child."""
    settings = Settings(data=tmp_path, intake_memory_bytes_max=256 * MEBIBYTE)
    lane = b'{"origin":"A","destination":"B","unit_cost":"1"},'
    body = b'{"lanes":[' + lane * 1_000_000 + lane[:-1] + b"]}"

    with (
        working_application(settings) as application,
        client_of(create_app(application, settings)) as client,
    ):
        house = House(client=client, folder=tmp_path)
        answer = house.post(body)
        next_one = house.post(EXAMPLE)

    assert (answer.status_code, answer.json()["type"]) == (413, "/problems/body-too-large")
    assert next_one.status_code == 202


def test_check_that_takes_too_long_is_given_up(tmp_path: Path) -> None:
    """503 within the limit; what would take longer is not waited for."""
    settings = Settings(data=tmp_path, intake_seconds_max=1)
    lane = b'{"origin":"A","destination":"B","unit_cost":"1"},'
    body = b'{"lanes":[' + lane * 2_000_000 + lane[:-1] + b"]}"

    with (
        working_application(settings) as application,
        client_of(create_app(application, settings)) as client,
    ):
        house = House(client=client, folder=tmp_path)
        began = time.monotonic()
        answer = house.post(body)
        seconds = time.monotonic() - began

    assert (answer.status_code, answer.json()["type"]) == (503, "/problems/busy")
    assert "Retry-After" in answer.headers
    assert seconds < 15
