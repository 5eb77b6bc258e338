"""A database that goes away in the middle: nothing is lost, nothing is stored twice."""

from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import replace
from pathlib import Path

import pytest

from service.runs.faults import StoreUnavailable
from service.runs.read import Read
from service.runs.run import RunState
from service.store.audit import check_store
from service.store.database import Database
from service.store.sql_store import SqlStore
from service.store.transaction import SqlTransaction
from tests.databases import FakeClock
from tests.run_factories import FakePlanner, execution, submitted


class Leaving(SqlStore):
    """A store that loses its connection at chosen transactions that write.

    ``before`` are lost before anything happened, ``after`` just after they were committed: the
    answer to the COMMIT is what got lost.
    """

    def __init__(self, database: Database, *, before: set[int], after: set[int]) -> None:
        """Count transactions from 1."""
        super().__init__(database, FakeClock())
        self._before = before
        self._after = after
        self._count = 0

    @contextmanager
    def transaction(self) -> Iterator[SqlTransaction]:
        """Begin a unit of work, unless this one is lost."""
        self._count += 1
        number = self._count
        if number in self._before:
            raise StoreUnavailable("the connection is lost")
        with super().transaction() as transaction:
            yield transaction
        if number in self._after:
            raise StoreUnavailable("the answer to COMMIT is lost")


# Of one execution, transaction 1 is the claim and 2 the finish.
@pytest.mark.parametrize(
    ("before", "after"),
    [
        ({2}, set()),
        ({2, 3, 4}, set()),
        (set(), {2}),
        ({3}, {2, 4}),
    ],
    ids=["away once", "away for a while", "answer lost", "answer lost, then away, then lost again"],
)
def test_finish_is_repeated_until_it_is_stored_once(
    store: SqlStore,
    database: Database,
    tmp_path: Path,
    before: set[int],
    after: set[int],
) -> None:
    """The token that finished stays in the row, so that a repeated finish is known as such."""
    run = submitted(store, tmp_path / "in")
    leaving = Leaving(database, before=before, after=after)

    state = execution(leaving, tmp_path / "scratch")(run.id)

    now = Read(store=store).run(run.id, "local")
    assert state is now.state is RunState.PLANNED
    assert (now.attempt, now.crashes) == (1, 0)
    assert check_store(database).problems == ()


def test_run_is_left_to_the_sweep_when_the_database_stays_away(
    store: SqlStore,
    database: Database,
    tmp_path: Path,
) -> None:
    """Beyond its lease a holder has no right to the run any more, and says so by raising."""
    run = submitted(store, tmp_path / "in")
    leaving = Leaving(database, before=set(range(2, 1000)), after=set())
    ticks = iter(range(0, 10_000, 10))
    execute = replace(
        execution(leaving, tmp_path / "scratch"),
        elapsed=lambda: float(next(ticks)),
    )

    with pytest.raises(StoreUnavailable):
        execute(run.id)

    assert Read(store=store).run(run.id, "local").state is RunState.RUNNING
    assert list((tmp_path / "scratch").iterdir()) == []


def test_database_lost_while_a_child_is_fed_counts_as_no_crash(
    store: SqlStore,
    database: Database,
    tmp_path: Path,
) -> None:
    """What the run was given could not be read; the run itself did nothing wrong."""
    run = submitted(store, tmp_path / "in")

    class Unreadable(SqlStore):
        def blob_to_file(self, tenant: str, digest: str, path: Path) -> None:
            raise StoreUnavailable(f"lost before {tenant} {digest} reached {path}")

    planner = FakePlanner()
    state = execution(Unreadable(database, FakeClock()), tmp_path / "scratch", planner)(run.id)

    now = Read(store=store).run(run.id, "local")
    assert state is now.state is RunState.WAITING
    assert (now.attempt, now.crashes, planner.seen) == (1, 0, [])
