"""The embedded engine over a real store: whatever its children do, every run comes to its end."""

import signal
import time
from dataclasses import dataclass
from pathlib import Path

import pytest

from service.engine.lock import EngineLock
from service.network.options import Options
from service.planning.outcome import FailureReason
from service.runs.faults import EngineLocked
from service.runs.run import LOCAL, RunState
from service.runs.submit import Submit
from service.store.database import Database
from service.store.sql_store import SqlStore, SystemClock
from tests.engine.houses import House, await_true, engine_over, fault
from tests.engine.processes import await_end
from tests.run_factories import WIRE_DIGEST, intake_folder


def test_run_is_planned_as_soon_as_it_is_submitted(house: House) -> None:
    """The wake-up, not the sweep, starts it: a client waits for a second, not for five."""
    house.finished(house.submit())  # the first waits for the child's start
    began = time.monotonic()

    run = house.finished(house.submit())

    assert run.state is RunState.PLANNED
    assert run.attempt == 1
    assert time.monotonic() - began < 2


def test_lost_wake_up_loses_no_run(house: House) -> None:
    """A run is found by the sweep although nobody said that it waits."""
    house.finished(house.submit())
    left = intake_folder(house.folder / "unannounced")

    class Deaf:
        def notify(self, run_id: str) -> None:
            """Lose the wake-up."""

    run = Submit(store=house.store, dispatcher=Deaf())(left, Options(), LOCAL, WIRE_DIGEST)

    assert house.finished(run).state is RunState.PLANNED


@pytest.mark.parametrize(
    "task",
    [
        {"do": "kill", "signal": int(signal.SIGKILL)},
        {"do": "kill", "signal": int(signal.SIGSEGV)},
        {"do": "exit", "code": 7},
    ],
)
def test_run_whose_children_die_fails_after_the_third(
    house: House, task: dict[str, object]
) -> None:
    """Row 5: retried twice, then a reason; the next run is served."""
    poisoned = house.finished(house.submit(fault(**task)))
    healthy = house.finished(house.submit())

    assert (poisoned.state, poisoned.reason) == (RunState.FAILED, FailureReason.SOLVER_CRASHED)
    assert (poisoned.attempt, poisoned.crashes) == (3, 3)
    assert healthy.state is RunState.PLANNED


def test_run_whose_child_died_once_is_planned(house: House) -> None:
    """An accident is not poison: the second child plans it, and one crash is on record."""
    run = house.finished(house.submit(fault(do="exit", code=7, once=True)))

    assert run.state is RunState.PLANNED
    assert (run.attempt, run.crashes) == (2, 1)


def test_run_that_hangs_in_c_ends_at_its_time_limit(house: House) -> None:
    """Row 6: failed with a reason within a second of the limit, and the slot is free again."""
    house.finished(house.submit())
    began = time.monotonic()

    hung = house.finished(house.submit(fault(do="hang_in_c"), seconds=2))
    waited = time.monotonic() - began
    healthy = house.finished(house.submit())

    assert (hung.state, hung.reason) == (RunState.FAILED, FailureReason.TIME_LIMIT)
    assert waited < 2 + 1
    assert healthy.state is RunState.PLANNED


def test_run_that_eats_memory_fails_with_that_reason(house: House) -> None:
    """Row 7: never a plan, never "no plan", and not retried, since it would eat as much again."""
    run = house.finished(house.submit(fault(do="memory_error", mebibytes_each=16)))

    assert (run.state, run.reason) == (RunState.FAILED, FailureReason.MEMORY_LIMIT)
    assert run.attempt == 1


def test_run_that_waits_beyond_its_deadline_fails(house: House) -> None:
    """A busy slot must not leave a waiting run undecided: the watcher settles it."""
    hung = house.submit(fault(do="hang_in_c"), seconds=12)
    house.await_run(hung, lambda now: now.state is RunState.RUNNING)

    late = house.finished(house.submit(seconds=1))

    assert (late.state, late.reason) == (RunState.FAILED, FailureReason.DEADLINE)
    assert house.read(hung).state is RunState.RUNNING


def test_stop_gives_the_run_back_uncounted_and_leaves_nobody(house: House) -> None:
    """A restart says nothing about a run: it waits again, and no solver outlives its service."""
    run = house.submit(fault(do="hang_in_c"))
    house.await_run(run, lambda now: now.state is RunState.RUNNING)
    time.sleep(0.5)  # until the child has the task
    pids = [house.busy_pid(), *house.idle()]
    began = time.monotonic()

    house.engine.stop()

    assert time.monotonic() - began < 2
    now = house.read(run)
    assert (now.state, now.crashes) == (RunState.WAITING, 0)
    assert all(await_end(pid) for pid in pids)


def test_next_engine_takes_over_what_a_killed_one_was_planning(
    database: Database, tmp_path: Path
) -> None:
    """Row 3: after kill -9 a run is still called running; the next start plans it, uncounted."""
    store = SqlStore(database, SystemClock())
    engine, planner = engine_over(store, tmp_path / "scratch")
    house = House(store=store, engine=engine, planner=planner, folder=tmp_path)
    run = house.submit()
    with store.transaction() as transaction:
        claim = transaction.claim(run.id, token="0" * 32, lease_seconds=30, crashes_max=3)  # type: ignore[arg-type] # any token
    assert claim is not None

    engine.start(EngineLock(tmp_path / "lanewright.db.engine"))

    now = house.finished(run)
    assert (now.state, now.attempt, now.crashes) == (RunState.PLANNED, 2, 0)
    engine.stop()


def test_child_whose_claim_is_gone_is_ended(house: House) -> None:
    """Whoever cancels a run, or takes it over, ends the work on it within a second."""
    run = house.submit(fault(do="hang_in_c"))
    house.await_run(run, lambda now: now.state is RunState.RUNNING)
    time.sleep(0.5)  # until the child has the task
    pid = house.busy_pid()
    (token,) = house.planner.tokens()
    with house.store.transaction() as transaction:
        (claim,) = [
            claim
            for claim in transaction.held(expired_only=False, limit=10)
            if claim.token == token
        ]
        transaction.give_back(claim, crashed=False)

    assert await_end(pid, 1)


def test_second_engine_on_one_database_refuses_to_start(tmp_path: Path) -> None:
    """Row 4: two executors would each take the other's running runs for leftovers of a crash."""
    first = EngineLock(tmp_path / "lanewright.db.engine")

    with pytest.raises(EngineLocked, match="another process"):
        EngineLock(tmp_path / "lanewright.db.engine")

    first.release()
    EngineLock(tmp_path / "lanewright.db.engine").release()


@dataclass(slots=True)
class FakeLock:
    """A lock that a test takes away."""

    here: bool = True

    def held(self) -> bool:
        """Say whether it is held."""
        return self.here

    def release(self) -> None:
        """Let go."""
        self.here = False


def test_engine_that_lost_its_lock_claims_nothing_until_it_has_it_again(
    database: Database, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """A database that restarts lets go of the lock, and another process may have it by now."""
    monkeypatch.setattr("service.engine.local.SWEEP_SECONDS", 0.2)
    store = SqlStore(database, SystemClock())
    engine, planner = engine_over(store, tmp_path / "scratch")
    house = House(store=store, engine=engine, planner=planner, folder=tmp_path)
    lock = FakeLock()
    engine.start(lock)
    house.finished(house.submit())

    lock.here = False
    await_true(lambda: not engine.working())
    run = house.submit()
    time.sleep(1)
    meanwhile = house.read(run).state
    lock.here = True
    after = house.finished(run)
    engine.stop()

    assert meanwhile is RunState.WAITING
    assert (after.state, after.attempt) == (RunState.PLANNED, 1)


def test_mistake_of_ours_in_one_run_stops_no_other(house: House) -> None:
    """An exception that nobody foresaw is logged; the slot lives on and plans the next run."""
    broken = house.finished(house.submit("rubbish"))
    healthy = house.finished(house.submit())

    assert (broken.state, broken.reason) == (RunState.FAILED, FailureReason.INTERNAL)
    assert house.engine.working()
    assert healthy.state is RunState.PLANNED
