"""A store with an engine over it whose children misbehave on request."""

import os
import time
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import orjson

from service.engine.children import Nursery
from service.engine.local import LocalEngine
from service.engine.tasks import PlanningChildren
from service.network.options import Options
from service.runs.execute import Execute
from service.runs.recover import Recover
from service.runs.run import LOCAL, Run, RunState
from service.runs.submit import Submit
from service.runs.sweep import Sweep
from service.runs.watch import Watch
from service.store.sql_store import SqlStore
from tests.engine.processes import COMMAND, children_of
from tests.run_factories import WIRE_DIGEST, intake_folder

FINAL = {RunState.PLANNED, RunState.NO_PLAN, RunState.FAILED, RunState.CANCELLED}


@dataclass(frozen=True, slots=True, kw_only=True)
class House:
    """A store with an engine over it, and how to use them."""

    store: SqlStore
    engine: LocalEngine
    planner: PlanningChildren
    folder: Path

    def submit(self, label: str | None = None, *, seconds: int = 60) -> Run:
        """Submit a run whose child does what ``label`` says."""
        left = intake_folder(self.folder / f"in-{time.monotonic_ns()}")
        options = Options(label=label, deadline_seconds=seconds)
        return Submit(store=self.store, dispatcher=self.engine)(left, options, LOCAL, WIRE_DIGEST)

    def read(self, run: Run) -> Run:
        """Return the run as it is now."""
        with self.store.reading() as store:
            return store.run(run.id, run.tenant)

    def await_run(self, run: Run, wanted: Callable[[Run], bool], seconds: float = 20) -> Run:
        """Wait until the run is as ``wanted``, and return it."""
        until = time.monotonic() + seconds
        while not wanted(now := self.read(run)):
            assert time.monotonic() < until, f"{now.state} after {seconds} s"
            time.sleep(0.02)
        return now

    def finished(self, run: Run) -> Run:
        """Wait until the run is final."""
        return self.await_run(run, lambda now: now.state in FINAL)

    def busy_pid(self) -> int:
        """Return the process that plans now: the one child that is not idle."""
        found = children_of(os.getpid())
        return next(
            pid for pid, words in found.items() if "plan" in words and pid not in self.idle()
        )

    def idle(self) -> tuple[int, ...]:
        """Return the processes that wait for work."""
        return self.planner._nursery.pids()


def engine_over(store: SqlStore, scratch: Path) -> tuple[LocalEngine, PlanningChildren]:
    """Return an engine whose children misbehave on request."""
    planner = PlanningChildren(Nursery("plan", command=COMMAND), memory_bytes=512 * 2**20)
    engine = LocalEngine(
        execute=Execute(store=store, planner=planner, scratch=scratch, lease_seconds=30),
        sweep=Sweep(store=store),
        watch=Watch(store=store, lease_seconds=30),
        recover=Recover(store=store),
        planner=planner,
        poll_seconds=0.1,
    )
    return engine, planner


def fault(**task: object) -> str:
    """Return the label that makes a child do ``task``."""
    return orjson.dumps(task).decode()


def await_true(condition: Callable[[], bool], seconds: float = 20) -> None:
    """Wait until ``condition`` holds."""
    until = time.monotonic() + seconds
    while not condition():
        assert time.monotonic() < until, "waited in vain"
        time.sleep(0.02)
