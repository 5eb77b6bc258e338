"""What only a real server on a real socket shows: slow, torn and endless requests."""

import contextlib
import socket
import threading
import time
from collections.abc import Iterator
from pathlib import Path

import pytest
from fastapi import FastAPI

from service.doors.http.server import HEADER_BYTES_BUFFERED_MAX
from service.doors.http.spool import Spool
from tests.doors.http.fakes import RUN_ID, FakeHouse, await_true, fake_app, real_server

WIRE_BYTES_MAX = 4 * 2**20


@pytest.fixture
def house() -> FakeHouse:
    """Return use cases to be told what to answer."""
    return FakeHouse()


@pytest.fixture
def app(house: FakeHouse, tmp_path: Path) -> FastAPI:
    """Return the door over ``house``, with little patience."""
    app = fake_app(house, tmp_path, body_wire_bytes_max=WIRE_BYTES_MAX)
    patience = Spool(
        tmp_path / "spool",
        wire_bytes_max=WIRE_BYTES_MAX,
        idle_seconds_max=0.5,
        body_seconds_max=2.0,
    )
    object.__setattr__(app.state.door, "spool", patience)
    return app


@pytest.fixture
def port(app: FastAPI) -> Iterator[int]:
    """Serve the door; return its port."""
    with real_server(app) as port:
        yield port


class Talk:
    """A connection on which a test says exactly what it wants."""

    def __init__(self, port: int) -> None:
        """Connect."""
        self.connection = socket.create_connection(("127.0.0.1", port), timeout=20)
        self.port = port

    def post(self, *headers: str) -> None:
        """Begin a request that posts a network."""
        self.say(
            "POST /v1/runs HTTP/1.1",
            f"Host: 127.0.0.1:{self.port}",
            "Content-Type: application/json",
            *headers,
            "",
            "",
        )

    def say(self, *lines: str) -> None:
        """Send lines."""
        self.connection.sendall("\r\n".join(lines).encode())

    def hear(self) -> tuple[int, bytes]:
        """Return status and everything else of the answer, until the other side closes."""
        received = b""
        while piece := self._piece():
            received += piece
            head, separator, body = received.partition(b"\r\n\r\n")
            lengths = [
                int(line.partition(b":")[2])
                for line in head.lower().split(b"\r\n")
                if line.startswith(b"content-length:")
            ]
            if separator and lengths and len(body) >= lengths[0]:
                break
        return (int(received.split()[1]) if received else 0), received

    def _piece(self) -> bytes:
        """Return what comes next, or nothing when the other side has closed, politely or not."""
        try:
            return self.connection.recv(65536)
        except ConnectionResetError:
            return b""

    def close(self) -> None:
        """Hang up."""
        self.connection.close()


@pytest.fixture
def talk(port: int) -> Iterator[Talk]:
    """Connect to the served door."""
    talk = Talk(port)
    yield talk
    talk.close()


def alive(port: int) -> bool:
    """Say whether the service answers another request."""
    talk = Talk(port)
    talk.say("GET /healthz HTTP/1.1", f"Host: 127.0.0.1:{port}", "", "")
    status, _ = talk.hear()
    talk.close()
    return status == 200


def test_body_in_chunks_is_accepted(talk: Talk, house: FakeHouse) -> None:
    """Whoever packs on the fly does not know the length beforehand."""
    talk.post("Transfer-Encoding: chunked")
    talk.say("2", "{}", "0", "", "")

    status, _ = talk.hear()

    assert status == 202
    assert house.bodies == [b"{}"]


def test_sender_that_pauses_too_long_is_answered(talk: Talk, port: int, tmp_path: Path) -> None:
    """408 instead of a connection and a file that are held for ever."""
    began = time.monotonic()
    talk.post("Content-Length: 100")
    talk.say("{")

    status, answer = talk.hear()

    assert status == 408
    assert b"/problems/body-too-slow" in answer
    assert 0.5 <= time.monotonic() - began < 5
    await_true(lambda: not list((tmp_path / "spool").iterdir()))
    assert alive(port)


def test_sender_that_trickles_is_answered(talk: Talk, port: int) -> None:
    """A byte now and then is no pause, but the whole has a limit of its own."""
    began = time.monotonic()
    talk.post("Content-Length: 1000000")
    stop = threading.Event()

    def trickle() -> None:
        while not stop.wait(0.1):
            try:
                talk.say(" ")
            except OSError:
                return

    thread = threading.Thread(target=trickle)
    thread.start()
    status, answer = talk.hear()
    stop.set()
    thread.join()

    assert status == 408
    assert b"/problems/body-too-slow" in answer
    assert 2.0 <= time.monotonic() - began < 6
    assert alive(port)


def test_endless_body_is_cut_at_the_limit(
    talk: Talk, port: int, tmp_path: Path, house: FakeHouse
) -> None:
    """Nothing is believed that a header says: what arrives is counted."""
    talk.post("Transfer-Encoding: chunked")
    piece = "10000\r\n" + " " * 0x10000 + "\r\n"

    def pour() -> None:
        try:
            for _ in range(1000):
                talk.say(piece)
        except OSError:
            return

    thread = threading.Thread(target=pour)
    thread.start()
    status, answer = talk.hear()
    # The server may have cut the line already, while the thread was still pouring.
    with contextlib.suppress(OSError):
        talk.connection.shutdown(socket.SHUT_RDWR)
    thread.join()

    assert status == 413
    assert b"/problems/body-too-large" in answer
    assert house.bodies == []
    await_true(lambda: not list((tmp_path / "spool").iterdir()))
    assert alive(port)


def test_declared_size_above_the_limit_is_answered_at_once(talk: Talk, port: int) -> None:
    """The client has sent nothing of it yet and hears that it need not."""
    talk.post(f"Content-Length: {WIRE_BYTES_MAX + 1}")

    status, answer = talk.hear()

    assert status == 413
    assert b"connection: close" in answer.lower()
    assert alive(port)


def test_client_that_hangs_up_leaves_nothing(
    talk: Talk, port: int, tmp_path: Path, house: FakeHouse
) -> None:
    """A body that was cut off is never checked, let alone planned."""
    spool = tmp_path / "spool"
    talk.post("Content-Length: 1000000")
    talk.say("x" * 1000)
    await_true(lambda: bool(list(spool.iterdir())))

    talk.close()

    await_true(lambda: not list(spool.iterdir()))
    assert house.bodies == []
    assert alive(port)


@pytest.mark.parametrize("kibibytes", [20, 2 * HEADER_BYTES_BUFFERED_MAX // 1024])
def test_huge_headers_are_refused(talk: Talk, port: int, kibibytes: int) -> None:
    """With a problem where the door sees them, else by the server itself, which may hang up."""
    talk.say(
        "GET /healthz HTTP/1.1", f"Host: 127.0.0.1:{port}", f"X: {'x' * 1024 * kibibytes}", "", ""
    )

    status, _ = talk.hear()

    assert status in ({431} if kibibytes == 20 else {400, 0})
    assert alive(port)


@pytest.mark.parametrize(
    "lines",
    [
        ["GARBAGE"],
        ["GET / HTTP/1.1", "No colon"],
        ["POST /v1/runs HTTP/1.1", "Host: 127.0.0.1", "Content-Length: -1"],
        ["POST /v1/runs HTTP/1.1", "Host: 127.0.0.1", "Content-Length: 1", "Content-Length: 2"],
        ["POST /v1/runs HTTP/1.1", "Host: 127.0.0.1", "Transfer-Encoding: gzip, chunked"],
        ["GET / HTTP/1.1"],
        ["\x16\x03\x01\x02"],
    ],
)
def test_what_is_not_http_is_refused(talk: Talk, port: int, lines: list[str]) -> None:
    """Smuggled lengths, a TLS greeting, no host: the connection ends, the service does not."""
    talk.say(*lines, "", "")

    status, _ = talk.hear()

    assert status in {400, 421, 501}
    assert alive(port)


def test_host_must_name_the_port_that_is_listened_on(talk: Talk) -> None:
    """The port comes from the socket, so that a free one that the system chose is right, too."""
    talk.say("GET /healthz HTTP/1.1", "Host: 127.0.0.1:8080", "", "")

    status, answer = talk.hear()

    assert status == 421
    assert b"/problems/wrong-host" in answer


def test_reads_are_answered_while_bodies_arrive(talk: Talk, port: int) -> None:
    """A slow sender holds a connection, not the service."""
    talk.post("Content-Length: 1000000")

    other = Talk(port)
    other.say(f"GET /v1/runs/{RUN_ID} HTTP/1.1", f"Host: localhost:{port}", "", "")
    status, _ = other.hear()
    other.close()

    assert status == 200


def test_stopping_server_leaves_no_body(app: FastAPI, tmp_path: Path) -> None:
    """Who hangs in the middle of a body is cut off, and what arrived of it is removed."""
    with real_server(app) as port:
        talk = Talk(port)
        talk.post("Content-Length: 100")
        await_true(lambda: bool(list((tmp_path / "spool").iterdir())))

    talk.close()
    assert list((tmp_path / "spool").iterdir()) == []
