"""Claims: of several that try, one holds a run; whoever lost it writes nothing."""

import threading
import time
from collections.abc import Callable
from datetime import timedelta
from pathlib import Path

import pytest
from sqlalchemy import text

from service.runs.identity import new_token
from service.runs.run import Claim, Ending, Finish, Run, RunState
from service.store.database import Database
from service.store.sql_store import SqlStore
from tests.databases import FakeClock
from tests.run_factories import sha256, submitted

THREADS = 8


@pytest.fixture
def run(store: SqlStore, tmp_path: Path) -> Run:
    """Return a run that waits."""
    return submitted(store, tmp_path / "in")


@pytest.fixture
def pass_time(database: Database, clock: FakeClock) -> Callable[[float], None]:
    """Return a function that lets time pass: PostgreSQL has its own and must be waited for."""
    return clock.advance if database.is_sqlite else time.sleep


def claimed(store: SqlStore, run: Run, *, lease_seconds: float = 30) -> Claim | None:
    """Try to take ``run``."""
    with store.transaction() as transaction:
        return transaction.claim(
            run.id,
            token=new_token(),
            lease_seconds=lease_seconds,
            crashes_max=3,
        )


def taken(store: SqlStore, run: Run, *, lease_seconds: float = 30) -> Claim:
    """Take ``run``, which must be to be had."""
    claim = claimed(store, run, lease_seconds=lease_seconds)
    assert claim is not None
    return claim


def finished(store: SqlStore, claim: Claim, *, state: RunState = RunState.PLANNED) -> Finish:
    """Try to make the run of ``claim`` final."""
    with store.transaction() as transaction:
        return transaction.finish(
            claim,
            Ending(
                state=state,
                reason=None,
                detail=None,
                attempt=claim.attempt,
                started_at=None,
                finished_at=transaction.now,
                plan_digest=sha256(b"plan"),
                certificate_digest=sha256(b"certificate"),
                seconds={},
            ),
        )


def stands(store: SqlStore, run: Run) -> Run:
    """Return the run as it is now."""
    with store.reading() as reading:
        return reading.run(run.id, run.tenant)


def at_once(work: Callable[[], object]) -> list[object]:
    """Do ``work`` in several threads that begin together; return what each came to."""
    results: list[object] = []
    barrier = threading.Barrier(THREADS)

    def begin() -> None:
        barrier.wait()
        results.append(work())

    threads = [threading.Thread(target=begin) for _ in range(THREADS)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join(60)
    assert len(results) == THREADS
    return results


def test_of_eight_that_claim_one_wins(store: SqlStore, run: Run) -> None:
    """Two holders would plan twice, and the books would say so."""
    results = at_once(lambda: claimed(store, run))

    winners = [claim for claim in results if claim is not None]
    assert len(winners) == 1
    assert (stands(store, run).state, stands(store, run).attempt) == (RunState.RUNNING, 1)


def test_of_eight_that_finish_with_one_token_one_stores(store: SqlStore, run: Run) -> None:
    """A finish whose answer was lost is repeated; the outcome must be there once."""
    claim = taken(store, run)

    results = at_once(lambda: finished(store, claim))

    assert sorted(map(str, results)) == ["already_stored"] * 7 + ["stored"]
    assert stands(store, run).state is RunState.PLANNED


def test_claim_says_how_long_is_left_by_the_clock_of_the_store(store: SqlStore, run: Run) -> None:
    """The worker's clock may be wrong; it gets a duration to count down."""
    claim = taken(store, run)

    assert claim.deadline_at == run.created_at + timedelta(seconds=60) == run.deadline_at
    assert 0 < claim.seconds_left <= 60
    assert (claim.run_id, claim.tenant, claim.attempt) == (run.id, "local", 1)


def test_lease_that_is_over_lets_another_take_the_run(
    store: SqlStore,
    run: Run,
    pass_time: Callable[[float], None],
) -> None:
    """The former holder comes back from a long sleep and must find itself fenced out."""
    former = taken(store, run, lease_seconds=0.05)
    pass_time(0.1)

    latter = taken(store, run)

    assert finished(store, former) is Finish.FENCED
    assert stands(store, run).state is RunState.RUNNING
    assert (latter.attempt, stands(store, run).crashes) == (2, 1)
    assert finished(store, latter) is Finish.STORED
    assert finished(store, former) is Finish.FENCED
    assert finished(store, latter) is Finish.ALREADY_STORED


def test_lease_that_lasts_keeps_the_run(store: SqlStore, run: Run) -> None:
    """A second wake-up for the same run changes nothing."""
    taken(store, run)

    assert claimed(store, run) is None
    assert stands(store, run).attempt == 1


def test_last_crash_is_left_to_the_sweep(
    store: SqlStore,
    run: Run,
    pass_time: Callable[[float], None],
) -> None:
    """A third holder that goes silent ends the run, which takes an ending and an event."""
    for _ in range(2):
        taken(store, run, lease_seconds=0.05)
        pass_time(0.1)
    taken(store, run, lease_seconds=0.05)
    pass_time(0.1)

    assert stands(store, run).crashes == 2
    assert claimed(store, run) is None


def test_renewed_lease_holds_and_a_lost_one_is_told(
    store: SqlStore,
    run: Run,
    pass_time: Callable[[float], None],
) -> None:
    """One query tells a process which of its children work for nothing."""
    claim = taken(store, run, lease_seconds=0.3)
    stranger = new_token()

    with store.transaction() as transaction:
        held = transaction.renew([claim.token, stranger], lease_seconds=30, progress={})
        nothing = transaction.renew([], lease_seconds=30, progress={})
    pass_time(0.5)

    assert (held, nothing) == (frozenset({claim.token}), frozenset())
    assert claimed(store, run) is None


def test_run_beyond_its_deadline_is_not_claimed(
    store: SqlStore,
    tmp_path: Path,
    pass_time: Callable[[float], None],
) -> None:
    """Its plan would come too late for whoever asked."""
    late = submitted(store, tmp_path / "late", deadline_seconds=1)
    with store.reading() as reading:
        waiting_before = reading.waiting(limit=10)
    pass_time(1.1)

    assert claimed(store, late) is None
    with store.reading() as reading:
        assert waiting_before == [late.id]
        assert reading.waiting(limit=10) == []
        assert reading.overdue(limit=10) == [(late.id, "local")]


def test_run_given_back_waits_again_and_counts_only_a_crash(store: SqlStore, run: Run) -> None:
    """A drain or a restart says nothing about the run; a child that died does."""
    first = taken(store, run)
    with store.transaction() as transaction:
        assert transaction.give_back(first, crashed=False) == 0
    second = taken(store, run)
    with store.transaction() as transaction:
        assert transaction.give_back(second, crashed=True) == 1
        assert transaction.give_back(first, crashed=True) is None

    assert stands(store, run).state is RunState.WAITING
    assert (stands(store, run).attempt, stands(store, run).crashes) == (2, 1)
    assert finished(store, second) is Finish.FENCED


def test_no_run_ends_twice(store: SqlStore, run: Run, database: Database) -> None:
    """Even one who could bring the dispatch row back would meet the key of the ending."""
    finished(store, taken(store, run))

    with pytest.raises(Exception, match=r"(?i)unique"), database.engine.begin() as connection:
        connection.execute(
            text("INSERT INTO run_ending SELECT * FROM run_ending WHERE run = :run"),
            {"run": run.id},
        )


def test_held_claims_are_seen_by_one_of_two_sweepers(store: SqlStore, run: Run) -> None:
    """On PostgreSQL the second skips what the first has locked; on SQLite it waits its turn."""
    claim = taken(store, run, lease_seconds=0)
    time.sleep(0.01)
    seen = []

    def sweep() -> object:
        with store.transaction() as transaction:
            for held in transaction.held(expired_only=False, limit=10):
                seen.append(held.token)
                transaction.give_back(held, crashed=False)
        return None

    at_once(sweep)

    assert seen == [claim.token]


def test_runs_wait_in_the_order_of_their_submission(store: SqlStore, tmp_path: Path) -> None:
    """First come, first served, whoever submits."""
    runs = []
    for number in range(3):
        runs.append(submitted(store, tmp_path / str(number)).id)
        time.sleep(0.002)  # ids sort by the millisecond

    with store.reading() as reading:
        assert reading.waiting(limit=2) == sorted(reading.waiting(limit=10))[:2]
        assert set(reading.waiting(limit=10)) == set(runs)
