"""``lanewright demo``: the demo network, planned and stored by the real service."""

import hashlib
import tempfile
import time
from pathlib import Path
from typing import TYPE_CHECKING

import orjson
import typer

from service.doors.command_line import parameters
from service.doors.command_line.backing import Backing
from service.doors.command_line.demo_network import demo_bytes
from service.doors.command_line.ending import EndingError, Exit, put, put_lines
from service.doors.command_line.progress import progress_bar
from service.doors.command_line.summary import summary_lines
from service.network.options import Options
from service.runs.run import LOCAL

if TYPE_CHECKING:
    from service.runs.run import Run
    from service.runs.use_cases import Application

FINAL = frozenset({"planned", "no_plan", "failed", "cancelled"})
POLL_SECONDS = 0.05


def demo(context: typer.Context, *, as_json: parameters.AsJson = False) -> None:
    """Plan and store the demo network, show what came of it.

    With --json the demo network itself is written, to be changed and planned with solve.
    """
    network = demo_bytes()
    if as_json:
        put(network + b"\n")
        return
    backing = context.ensure_object(Backing)
    with backing.application() as application, progress_bar("planning"):
        run = _finished(application, _submitted(application, network))
        if run.state not in {"planned", "no_plan"}:
            detail = f"run {run.id} {run.state}: {run.detail or run.reason}"
            raise EndingError(Exit.FAILED, str(run.reason), detail)
        plan = orjson.loads(application.plan_bytes(run.id, LOCAL.tenant))
    address = backing.address()
    put_lines(
        [
            *summary_lines(plan, run_number=run.number),
            "",
            "The run is stored. To look at it, start the service in this folder:",
            "  lanewright serve     (without it on the path: .venv/bin/lanewright)",
            f"  {address}/v1/runs/{run.id}",
            f"  {address}/docs#/runs/read_run     to try the interface with that id",
        ]
    )


def _submitted(application: "Application", network: bytes) -> "Run":
    """Take the network in as a request would be; return the waiting run."""
    options = Options(label="demo")
    with tempfile.TemporaryDirectory(prefix="lanewright-") as name:
        folder = Path(name)
        spool = folder / "spool"
        spool.write_bytes(network)
        report = application.intake(
            spool, folder, options=options, media_type="application/json", content_encoding=None
        )
        if report.summary is None:
            detail = "the demo network was refused, which is a mistake in this release"
            raise EndingError(
                Exit.FAILED,
                "internal",
                detail,
                faults=report.faults,
                fault_count=report.fault_count,
            )
        digest = f"sha-256:{hashlib.sha256(network).hexdigest()}"
        return application.submit(folder, options, LOCAL, digest)


def _finished(application: "Application", run: "Run") -> "Run":
    """Wait until the run is final; its own deadline bounds the wait."""
    while run.state not in FINAL:
        time.sleep(POLL_SECONDS)
        run = application.run(run.id, LOCAL.tenant)
    return run
