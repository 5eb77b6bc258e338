"""Every accepted run comes to an end: sweeping, watching, and recovering at start."""

import time
from collections.abc import Callable
from pathlib import Path

import pytest

from service.planning.outcome import FailureReason
from service.runs.identity import new_token
from service.runs.read import Read
from service.runs.records import claimed_payload
from service.runs.recover import Recover
from service.runs.run import Claim, Run, RunState, engine_of
from service.runs.sweep import Sweep
from service.runs.watch import Watch
from service.store.audit import check_store
from service.store.database import Database
from service.store.sql_store import SqlStore
from tests.databases import FakeClock
from tests.run_factories import submitted


@pytest.fixture
def pass_time(database: Database, clock: FakeClock) -> Callable[[float], None]:
    """Return a function that lets time pass: PostgreSQL has its own and must be waited for."""
    return clock.advance if database.is_sqlite else time.sleep


def held(store: SqlStore, run: Run, *, lease_seconds: float = 30) -> Claim:
    """Take a run as a process would that then says nothing more, with its event."""
    with store.transaction() as transaction:
        claim = transaction.claim(
            run.id,
            token=new_token(),
            lease_seconds=lease_seconds,
            crashes_max=3,
        )
        assert claim is not None
        crashes = transaction.run(run.id, "local").crashes
        payload = claimed_payload(claim, crashes=crashes)
        transaction.append(f"run:{run.id}", "claimed", engine_of("local"), payload)
    return claim


def test_run_that_waits_beyond_its_deadline_fails(
    store: SqlStore,
    database: Database,
    tmp_path: Path,
    pass_time: Callable[[float], None],
) -> None:
    """Whoever asked no longer needs the plan, and must be told so."""
    late = submitted(store, tmp_path / "1", deadline_seconds=1)
    patient = submitted(store, tmp_path / "2", deadline_seconds=600)
    pass_time(1.1)

    waiting = Sweep(store=store)()

    run = Read(store=store).run(late.id, "local")
    assert waiting == [patient.id]
    assert (run.state, run.reason) == (RunState.FAILED, FailureReason.DEADLINE)
    assert run.finished_at is not None
    assert run.finished_at >= run.deadline_at
    assert (run.attempt, run.started_at) == (0, None)
    assert check_store(database).problems == ()


def test_silent_holder_loses_its_run_and_is_counted(
    store: SqlStore,
    database: Database,
    tmp_path: Path,
    pass_time: Callable[[float], None],
) -> None:
    """Three silent holders are three crashes, and the run ends."""
    run = submitted(store, tmp_path / "1")
    sweep = Sweep(store=store)
    seen = []
    for _ in range(3):
        held(store, run, lease_seconds=0.05)
        pass_time(0.1)
        seen.append(list(sweep()))

    now = Read(store=store).run(run.id, "local")
    assert seen == [[run.id], [run.id], []]
    assert (now.state, now.reason, now.crashes) == (
        RunState.FAILED,
        FailureReason.SOLVER_CRASHED,
        3,
    )
    assert check_store(database).problems == ()


def test_holder_that_renews_keeps_its_run(store: SqlStore, tmp_path: Path) -> None:
    """A long plan is no silent holder."""
    run = submitted(store, tmp_path / "1")
    claim = held(store, run, lease_seconds=0)
    gone = Watch(store=store, lease_seconds=30)([claim.token])

    waiting = Sweep(store=store)()

    assert gone == frozenset()
    assert waiting == []
    assert Read(store=store).run(run.id, "local").state is RunState.RUNNING


def test_watch_names_the_claims_that_are_gone(store: SqlStore, tmp_path: Path) -> None:
    """Their children are to be ended: nobody will take what they find."""
    run = submitted(store, tmp_path / "1")
    former = held(store, run)
    Recover(store=store)()
    latter = held(store, run)

    gone = Watch(store=store, lease_seconds=30)([former.token, latter.token])

    assert gone == {former.token}
    assert Watch(store=store, lease_seconds=30)([]) == frozenset()


def test_start_takes_over_what_was_running_uncounted(
    store: SqlStore,
    database: Database,
    tmp_path: Path,
) -> None:
    """Under the lock nobody else can be alive; leases need not run out first."""
    runs = [submitted(store, tmp_path / str(turn)) for turn in range(3)]
    for run in runs[:2]:
        held(store, run)

    recovered = Recover(store=store)()

    stands = [Read(store=store).run(run.id, "local") for run in runs]
    assert recovered == 2
    assert [run.state for run in stands] == [RunState.WAITING] * 3
    assert [(run.attempt, run.crashes) for run in stands] == [(1, 0), (1, 0), (0, 0)]
    assert Recover(store=store)() == 0
    assert check_store(database).problems == ()


def test_recovering_leaves_nothing_behind_however_much_there_is(
    store: SqlStore,
    tmp_path: Path,
) -> None:
    """More than one batch: a limit must not become a leak."""
    runs = [submitted(store, tmp_path / "in", body=b"x") for _ in range(101)]
    with store.transaction() as transaction:
        for run in runs:
            transaction.claim(run.id, token=new_token(), lease_seconds=30, crashes_max=3)

    recovered = Recover(store=store)()

    assert recovered == 101
    with store.transaction() as transaction:
        assert transaction.held(expired_only=False, limit=10) == []
