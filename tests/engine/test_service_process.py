"""The service as a process: killed in the middle of a run, stopped politely, started twice."""

import http.client
import json
import os
import re
import signal
import subprocess
import sys
import time
from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path
from typing import Any

import pytest

from service.proof.evidence import verify_evidence
from tests.engine.houses import await_true
from tests.engine.processes import await_end, children_of, running

ROOT = Path(__file__).parents[2]
NETWORK = (ROOT / "openapi" / "examples" / "network.json").read_bytes()
COMMAND = [sys.executable, "-c", "from service.main import main; main()", "serve", "--port", "0"]


class Service:
    """A service in a process of its own."""

    def __init__(self, folder: Path) -> None:
        """Start it on ``folder`` and wait until it serves."""
        self.process = subprocess.Popen(
            COMMAND,
            cwd=ROOT,
            env={**os.environ, "LANEWRIGHT_DATA": str(folder), "LANEWRIGHT_LOG_LEVEL": "error"},
            stderr=subprocess.PIPE,
            text=True,
        )
        assert self.process.stderr is not None
        found = re.search(r"http://127\.0\.0\.1:\d+", self.process.stderr.readline())
        self.address = found[0] if found else ""

    def get(self, path: str) -> Any:  # noqa: ANN401 - any JSON value
        """Read a document."""
        return json.loads(self.ask(path).read())

    def post(self) -> str:
        """Post the example network; return the path of the run."""
        return str(self.ask("/v1/runs", NETWORK).getheader("Location"))

    def ask(self, path: str, body: bytes | None = None) -> http.client.HTTPResponse:
        """Send a request; return the answer, which must be a good one."""
        connection = http.client.HTTPConnection(self.address.removeprefix("http://"), timeout=20)
        headers = {"Content-Type": "application/json", "Connection": "close"}
        connection.request("GET" if body is None else "POST", path, body, headers)
        answer = connection.getresponse()
        assert answer.status < 300, answer.read()
        return answer

    def await_state(self, path: str, state: str) -> dict[str, Any]:
        """Wait until the run at ``path`` is in ``state``."""
        until = time.monotonic() + 30
        while (run := self.get(path))["state"] != state:
            assert time.monotonic() < until, run
            time.sleep(0.05)
        return dict(run)

    def children(self, kind: str = "") -> list[int]:
        """Return the processes that the service started, of one kind or all."""
        found = children_of(self.process.pid)
        return [pid for pid, words in found.items() if not kind or kind in words]

    def end(self, number: int) -> int:
        """Send a signal, wait for the end, return the exit code."""
        self.process.send_signal(number)
        self.process.communicate(timeout=30)
        return self.process.returncode


@pytest.fixture
def service(tmp_path: Path) -> Iterator[Service]:
    """Start a service; it is gone afterwards."""
    started = Service(tmp_path)
    yield started
    if started.process.poll() is None:
        started.end(signal.SIGKILL)


def bound(pid: int) -> bool:
    """Say whether a child has bound its life to the service's: the step after that shows."""
    return Path(f"/proc/{pid}/oom_score_adj").read_text(encoding="ascii").strip() == "500"


def halted_run(service: Service) -> str:
    """Return the path of a run whose planning child stands still."""
    until = time.monotonic() + 20
    while not service.children("plan") or not all(map(bound, service.children("plan"))):
        assert time.monotonic() < until, "no child got ready"
        time.sleep(0.05)
    for pid in service.children("plan"):
        os.kill(pid, signal.SIGSTOP)
    path = service.post()
    service.await_state(path, "running")
    return path


def test_killed_service_loses_no_run_and_leaves_no_child(service: Service, tmp_path: Path) -> None:
    """Row 3: after kill -9 nothing runs on; the next start plans the run, no crash counted."""
    path = halted_run(service)
    pids = service.children()
    assert len(pids) >= 3  # a check, the planning child, a spare

    service.end(signal.SIGKILL)
    gone = [await_end(pid) for pid in pids]
    began = time.monotonic()
    again = Service(tmp_path)
    run = again.await_state(path, "planned")
    seconds = time.monotonic() - began
    events = again.get(f"{path}/history")["events"]
    again.end(signal.SIGTERM)

    assert all(gone)
    assert (run["attempt"], run["crashes"]) == (2, 0)
    kinds = [entry["event"]["kind"] for entry in events]
    assert kinds == ["submitted", "claimed", "given_back", "claimed", "finished"]
    assert seconds < 20


def test_stopped_service_gives_its_run_back(service: Service, tmp_path: Path) -> None:
    """SIGTERM ends the child and the process at once; the run waits for the next start."""
    path = halted_run(service)
    pids = service.children()
    began = time.monotonic()

    service.end(signal.SIGTERM)

    assert time.monotonic() - began < 10
    assert not any(running(pid) for pid in pids)
    again = Service(tmp_path)
    run = again.await_state(path, "planned")
    again.end(signal.SIGTERM)
    assert (run["attempt"], run["crashes"]) == (2, 0)


def test_second_service_on_one_database_refuses_to_start(service: Service, tmp_path: Path) -> None:
    """Row 4: with a sentence, an exit code, and no harm to the first."""
    second = subprocess.run(
        COMMAND,
        cwd=ROOT,
        env={**os.environ, "LANEWRIGHT_DATA": str(tmp_path)},
        capture_output=True,
        text=True,
        check=False,
        timeout=60,
    )

    assert second.returncode != 0
    assert "locked" in second.stderr
    assert "Traceback" not in second.stderr
    assert service.get("/healthz") == {"alive": True}


def test_service_answers_while_evidence_is_packed(service: Service, tmp_path: Path) -> None:
    """The work is a child's: as long as that one stands still, everybody else is served."""
    path = service.post()
    service.await_state(path, "planned")
    first = service.ask(f"{path}/evidence").read()
    (pid,) = service.children("evidence")
    os.kill(pid, signal.SIGSTOP)
    with ThreadPoolExecutor() as pool:
        second = pool.submit(lambda: service.ask(f"{path}/evidence").read())
        await_true(lambda: list((tmp_path / "spool").rglob("certificate.json")) != [])
        alive = service.get("/healthz")
        run = service.get(path)
        waiting = not second.done()
        os.kill(pid, signal.SIGCONT)
        same = second.result(timeout=30)

    assert alive == {"alive": True}
    assert run["state"] == "planned"
    assert waiting
    assert same == first
    (tmp_path / "evidence.zip").write_bytes(same)
    assert verify_evidence(tmp_path / "evidence.zip").verdict == "intact"


def test_child_that_is_killed_from_outside_costs_one_crash(service: Service) -> None:
    """Row 5: what the kernel's memory killer does; the run is planned by the next child."""
    path = halted_run(service)
    for pid in service.children("plan"):
        os.kill(pid, signal.SIGKILL)

    run = service.await_state(path, "planned")

    assert (run["attempt"], run["crashes"]) == (2, 1)
