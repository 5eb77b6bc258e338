"""A real service on the loopback, used over HTTP as a client uses it."""

import http.client
import json
import os
import re
import signal
import subprocess
import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from tests.benchmarks.stopwatch import family, resident_bytes, worked_seconds

ROOT = Path(__file__).parents[2]
START_SECONDS_MAX = 60
RUN_SECONDS_MAX = 300
LOG_SHOWN = 3000
# Short against what is measured, long enough not to keep the service busy with answering.
POLL_SECONDS = 0.004
_COMMAND = (sys.executable, "-c", "from service.main import main; main()", "serve", "--port", "0")


@dataclass(frozen=True, slots=True, kw_only=True)
class Served:
    """What one network took: seconds since the first byte of the body was sent.

    ``cpu_seconds`` is the time that the service and its children worked.
    """

    accepted_seconds: float
    planned_seconds: float
    fetched_seconds: float
    cpu_seconds: float
    plan: bytes


class Service:
    """A service in a process of its own, with a data folder of its own."""

    def __init__(self, folder: Path) -> None:
        """Start it on ``folder`` and wait until it listens and its children are ready."""
        self._log = (folder / "log").open("w+b")
        self.process = subprocess.Popen(
            _COMMAND,
            cwd=folder,
            env={
                **{
                    name: os.environ[name]
                    for name in ("PATH", "HOME", "LANG")
                    if name in os.environ
                },
                # The service of this tree, whatever tree the environment was installed from.
                "PYTHONPATH": str(ROOT),
                "LANEWRIGHT_DATA": str(folder / "data"),
                "LANEWRIGHT_LOG_LEVEL": "warning",
            },
            stdin=subprocess.DEVNULL,
            stdout=subprocess.DEVNULL,
            stderr=self._log,
        )
        self.port = self._port(folder / "log")
        self._settle()

    def _port(self, log: Path) -> int:
        """Return the port that the service says it listens on."""
        until = time.monotonic() + START_SECONDS_MAX
        while time.monotonic() < until and self.process.poll() is None:
            found = re.search(rb"http://127\.0\.0\.1:(\d+)", log.read_bytes())
            if found:
                return int(found[1])
            time.sleep(0.05)
        raise RuntimeError(f"the service did not start: {log.read_bytes()[-2000:]!r}")

    def _settle(self) -> None:
        """Wait until nothing moves any more: its memory is the same for a second."""
        until, same, before = time.monotonic() + START_SECONDS_MAX, 0, -1
        while same < 10:
            time.sleep(0.1)
            now = self.resident()
            same, before = (same + 1 if now == before else 0), now
            if time.monotonic() > until:
                raise RuntimeError("the service does not come to rest")

    def resident(self) -> int:
        """Return the resident memory of the service and its children."""
        return resident_bytes(family(self.process.pid))

    def settled_resident(self) -> int:
        """Return the same once nothing moves any more."""
        self._settle()
        return self.resident()

    def plan(self, body: bytes, media_type: str) -> Served:
        """Send a network, wait until it is planned, fetch the plan."""
        worked = worked_seconds(self.process.pid)
        connection = http.client.HTTPConnection("127.0.0.1", self.port, timeout=RUN_SECONDS_MAX)
        began = time.perf_counter()
        run = self._ask(connection, "POST", "/v1/runs", body, media_type)
        accepted = time.perf_counter()
        while run["state"] in {"waiting", "running"}:
            if time.perf_counter() - began > RUN_SECONDS_MAX:
                raise RuntimeError(f"not planned in time: {run}")
            time.sleep(POLL_SECONDS)
            run = self._ask(connection, "GET", run["links"]["self"])
        planned = time.perf_counter()
        if run["state"] != "planned":
            raise RuntimeError(f"not planned: {run}")
        connection.request("GET", run["links"]["plan"])
        answer = connection.getresponse()
        plan = answer.read()
        fetched = time.perf_counter()
        connection.close()
        if answer.status != http.HTTPStatus.OK:
            raise RuntimeError(f"no plan: {plan[:300]!r}")
        return Served(
            accepted_seconds=accepted - began,
            planned_seconds=planned - began,
            fetched_seconds=fetched - began,
            cpu_seconds=worked_seconds(self.process.pid) - worked,
            plan=plan,
        )

    def _ask(
        self,
        connection: http.client.HTTPConnection,
        method: str,
        path: str,
        body: bytes | None = None,
        media_type: str = "",
    ) -> dict[str, Any]:
        """Return the JSON of a good answer."""
        headers = {"Content-Type": media_type} if body is not None else {}
        connection.request(method, path, body, headers)
        answer = connection.getresponse()
        content = answer.read()
        if answer.status >= http.HTTPStatus.MULTIPLE_CHOICES:
            raise RuntimeError(f"{method} {path} answered {answer.status}: {content[:600]!r}")
        document: dict[str, Any] = json.loads(content)
        return document

    def end(self) -> None:
        """Stop it politely, and for certain."""
        self.process.send_signal(signal.SIGTERM)
        try:
            self.process.wait(timeout=30)
        except subprocess.TimeoutExpired:
            self.process.kill()
            self.process.wait()
        self._log.close()


@contextmanager
def serving(folder: Path) -> Iterator[Service]:
    """Run a service for the block."""
    service = Service(folder)
    try:
        yield service
    except RuntimeError as error:
        # The folder goes with the run; what the service said of it must not.
        said = (folder / "log").read_text(encoding="utf-8", errors="replace")[-LOG_SHOWN:]
        raise RuntimeError(f"{error}; the service said: {said}") from error
    finally:
        service.end()


class Watcher:
    """One watching process (``watching.py``)."""

    def __init__(self, what: str, number: int) -> None:
        """Start to watch."""
        self._process = subprocess.Popen(
            [sys.executable, "-m", "tests.benchmarks.watching", what, str(number)],
            cwd=ROOT,
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
        )

    def stop(self) -> dict[str, float]:
        """Stop; return what was seen."""
        output, _ = self._process.communicate(timeout=120)
        if self._process.returncode != 0:
            raise RuntimeError("what watches the service has failed")
        seen: dict[str, float] = json.loads(output)
        return seen


@contextmanager
def watching(what: str, number: int, seen: dict[str, float]) -> Iterator[None]:
    """Watch during the block; what was seen is in ``seen`` afterwards."""
    watcher = Watcher(what, number)
    # It has to be there before what it shall see; it loads next to nothing.
    time.sleep(0.5)
    try:
        yield
    finally:
        seen.update(watcher.stop())
