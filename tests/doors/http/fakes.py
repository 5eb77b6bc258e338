"""An application without store and children: what the HTTP door is tested against."""

import hashlib
import threading
import time
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, field, replace
from datetime import UTC, date, datetime
from pathlib import Path

import orjson
from fastapi import FastAPI
from fastapi.testclient import TestClient

from service.doors.http.app import create_app
from service.doors.http.server import http_server, listen
from service.network.faults import Fault, Status
from service.network.files.media_types import NETWORK_TYPES
from service.network.intake import IntakeReport
from service.network.options import Options
from service.runs.faults import ArtefactMissing, RunUnknown
from service.runs.run import LOCAL, Actor, Progress, Run, RunId, RunState
from service.runs.use_cases import Application
from service.settings import Settings

RUN_ID = RunId("run_01k8ovqf06vmkn95vj8ol7plvq")
MOMENT = datetime(2026, 2, 3, 15, 0, 0, 250_000, tzinfo=UTC)
BASE_URL = "http://127.0.0.1:8080"

PLAN = {
    "format": 1,
    "status": "planned",
    "plan_lines": [
        {"lane": "=L1", "origin": "DEP-NORTH", "destination": "YARD-07", "quantity": "880"},
    ],
    "order_lines": [],
    "consignments": [],
    "shortages": [],
    "site_use": [],
}


def digest(content: bytes) -> str:
    """Return the digest of ``content`` as the house writes it."""
    return "sha-256:" + hashlib.sha256(content).hexdigest()


def a_run(**differences: object) -> Run:
    """Return a planned run, but for ``differences``."""
    run = Run(
        id=RUN_ID,
        tenant="local",
        number="2026-02-03/1",
        state=RunState.PLANNED,
        reason=None,
        detail=None,
        label=None,
        plan_for=date(2026, 2, 3),
        created_at=MOMENT,
        deadline_at=MOMENT,
        started_at=MOMENT,
        finished_at=MOMENT,
        attempt=1,
        crashes=0,
        request_digest=digest(b"received"),
        network_digest=digest(b"meaning"),
        options_digest=digest(b"options"),
        plan_digest=digest(orjson.dumps(PLAN)),
        certificate_digest=digest(b"certificate"),
        counts={"items": 1, "sites": 2, "supply_rows": 1, "demand_rows": 1, "lanes": 1},
        submitted_by="local",
        progress=Progress(phase="stored", counts={"lanes": 1, "order_lines": 1}, seconds=0.25),
    )
    return replace(run, **differences)  # type: ignore[arg-type] # each test names its own fields


@dataclass(slots=True, kw_only=True)
class FakeHouse:
    """Use cases that answer what a test tells them to, and remember what they were asked."""

    run: Run = field(default_factory=a_run)
    status: Status = Status.ACCEPTED
    faults: tuple[Fault, ...] = ()
    fault_count: int | None = None
    error: Exception | None = None
    missing: list[str] = field(default_factory=list)
    plan: bytes = orjson.dumps(PLAN)
    received: bytes = b'{"format": 1}'
    intake_pause: threading.Event | None = None
    bodies: list[bytes] = field(default_factory=list)
    encodings: list[str | None] = field(default_factory=list)
    options: list[Options] = field(default_factory=list)
    wire_digests: list[str] = field(default_factory=list)

    def intake(
        self,
        spool: Path,
        folder: Path,
        *,
        options: Options,
        media_type: str,
        content_encoding: str | None,
    ) -> IntakeReport:
        """Remember the body; report what the test wants."""
        assert media_type in NETWORK_TYPES
        assert spool.parent == folder
        if self.intake_pause is not None:
            self.intake_pause.wait(20)
        self.bodies.append(spool.read_bytes())
        self.encodings.append(content_encoding)
        self.options.append(options)
        if self.error is not None:
            raise self.error
        count = len(self.faults) if self.fault_count is None else self.fault_count
        return IntakeReport(faults=self.faults, fault_count=count, status=self.status, summary=None)

    def submit(self, folder: Path, options: Options, actor: Actor, wire_digest: str) -> Run:
        """Remember the digest; the run waits now."""
        assert folder.is_dir()
        assert actor == LOCAL
        self.wire_digests.append(wire_digest)
        return replace(
            self.run,
            label=options.label,
            state=RunState.WAITING,
            plan_digest=None,
            certificate_digest=None,
            started_at=None,
            finished_at=None,
            attempt=0,
        )

    def read_run(self, run_id: RunId, tenant: str) -> Run:
        """Return the one run there is."""
        if self.error is not None:
            raise self.error
        if (run_id, tenant) != (self.run.id, self.run.tenant):
            raise RunUnknown
        return self.run

    def plan_bytes(self, run_id: RunId, tenant: str) -> bytes:
        """Return the plan."""
        self.read_run(run_id, tenant)
        return self.plan

    def certificate_bytes(self, run_id: RunId, tenant: str) -> bytes:
        """Return a certificate."""
        self.read_run(run_id, tenant)
        return b'{"format":1}'

    def network_bytes(self, run_id: RunId, tenant: str, *, form: str = "normal") -> bytes:
        """Return the network in a form."""
        self.read_run(run_id, tenant)
        return b"PK zip" if form == "normal" else self.received

    def history(self, run_id: RunId, tenant: str) -> list[dict[str, object]]:
        """Return one event."""
        self.read_run(run_id, tenant)
        event = {
            "tenant": "local",
            "stream": f"run:{run_id}",
            "seq": 1,
            "format": 1,
            "recorded_at": "2026-02-03T15:00:00.250000Z",
            "kind": "submitted",
            "actor": "local",
            "authentication": "none",
            "payload_digest": digest(b"payload"),
            "previous": "sha-256:" + "0" * 64,
            "hash": digest(b"event"),
        }
        return [{"event": event, "payload": {"label": None}, "salt": "00" * 16}]

    def evidence(self, run_id: RunId, tenant: str, path: Path) -> None:
        """Write a zip of sorts."""
        run = self.read_run(run_id, tenant)
        if run.plan_digest is None:
            raise ArtefactMissing(run, "evidence")
        path.write_bytes(b"PK evidence")

    def application(self) -> Application:
        """Return the use cases."""
        return Application(
            intake=self.intake,
            submit=self.submit,
            run=self.read_run,
            plan_bytes=self.plan_bytes,
            certificate_bytes=self.certificate_bytes,
            network_bytes=self.network_bytes,
            history=self.history,
            evidence=self.evidence,
            readiness=lambda: list(self.missing),
        )


def fake_app(house: FakeHouse, folder: Path, **settings: object) -> FastAPI:
    """Return the door over ``house``."""
    return create_app(house.application(), Settings(data=folder, **settings))  # type: ignore[arg-type] # each test names its own settings


def client_of(app: FastAPI) -> TestClient:
    """Return a client whose requests look as if they came over the loopback interface."""
    return TestClient(app, base_url=BASE_URL, raise_server_exceptions=False)


@contextmanager
def real_server(app: FastAPI) -> Iterator[int]:
    """Serve ``app`` on a free port of the loopback interface; yield the port."""
    listening = listen("127.0.0.1", 0)
    server = http_server(app)
    thread = threading.Thread(target=server.run, kwargs={"sockets": [listening]})
    thread.start()
    try:
        await_true(lambda: server.started)
        yield listening.getsockname()[1]
    finally:
        server.should_exit = True
        thread.join(20)
        listening.close()
        assert not thread.is_alive()


def await_true(condition: Callable[[], bool], seconds: float = 10) -> None:
    """Wait until ``condition`` holds."""
    until = time.monotonic() + seconds
    while not condition():
        assert time.monotonic() < until, "waited in vain"
        time.sleep(0.02)


def codes(document: dict[str, Sequence[dict[str, object]]]) -> list[tuple[object, object]]:
    """Return (pointer, code) of the errors of a problem."""
    return [(error["pointer"], error["code"]) for error in document["errors"]]
