"""What the audit says: the first broken link first, contents that contradict, and no crash."""

import os
from pathlib import Path

import pytest
from sqlalchemy import Engine, text
from sqlalchemy.exc import DBAPIError

from service.runs.events import event_hash, run_stream
from service.runs.run import Run
from service.store.audit import Problem, audit, check_store
from service.store.audit_strays import OF_A_RUN
from service.store.blob_repository import PART_BYTES
from service.store.database import Database
from service.store.sql_store import SqlStore, SystemClock
from service.store.tables import Base, WarmStartRow
from tests.run_factories import submitted
from tests.store.audit.tampering import (
    TABLES,
    at,
    found,
    rows_of,
)


def test_first_broken_link_is_named_first(
    database: Database,
    unguarded: Engine,
    runs: list[Run],
) -> None:
    """An auditor goes to that event, and looks at the rest afterwards."""
    stream = run_stream(runs[0].id)
    with unguarded.begin() as connection:
        connection.execute(
            text("UPDATE event SET actor = 'nobody' WHERE stream = :s AND seq >= 2"),
            {"s": stream},
        )

    problems = found(database)

    assert problems[0] == Problem(
        code="chain",
        place=f"local/{stream}#2",
        detail="hash does not cover the fields of the event",
    )
    assert f"local/{stream}#3" in [problem.place for problem in problems]


def test_event_hashed_anew_breaks_the_next_link(
    database: Database,
    unguarded: Engine,
    runs: list[Run],
) -> None:
    """Who changes an event and its hash must change every later one, and the rows besides."""
    stream = run_stream(runs[0].id)
    table = Base.metadata.tables["event"]
    row = next(r for r in rows_of(unguarded, table) if (r["stream"], r["seq"]) == (stream, 1))
    fields = {**row, "actor": "nobody"}
    del fields["hash"]
    values = {"actor": "nobody", "hash": event_hash(fields)}
    with unguarded.begin() as connection:
        connection.execute(table.update().where(at(table, row)).values(values))

    problems = found(database)

    assert [(p.code, p.place) for p in problems] == [
        ("chain", f"local/{stream}#2"),
        ("run_row", f"local/run {runs[0].id}"),
    ]


def test_swapped_payloads_are_found(
    database: Database,
    unguarded: Engine,
    runs: list[Run],
) -> None:
    """Each payload is salted for its own event, even where two say the same."""
    first, second = (run_stream(run.id) for run in runs[:2])
    with unguarded.begin() as connection:
        for before, after in ((first, "x"), (second, first), ("x", second)):
            connection.execute(
                text("UPDATE event_payload SET stream = :a WHERE stream = :b AND seq = 1"),
                {"a": after, "b": before},
            )

    places = {problem.place for problem in found(database) if problem.code == "chain"}

    assert places == {f"local/{first}#1", f"local/{second}#1"}


def test_run_taken_away_with_everything_leaves_a_gap(
    database: Database,
    unguarded: Engine,
    runs: list[Run],
) -> None:
    """Numbers are gapless so that no run can vanish from the middle of a day."""
    gone = {"run": runs[1].id, "stream": run_stream(runs[1].id)}
    with unguarded.begin() as connection:
        for table in ("run_dispatch", "run_ending", "plan_line", "order_line"):
            connection.execute(text(f"DELETE FROM {table} WHERE run = :run"), gone)  # noqa: S608 - our own
        for table in ("event_payload", "event"):
            connection.execute(text(f"DELETE FROM {table} WHERE stream = :stream"), gone)  # noqa: S608 - our own
        connection.execute(text("DELETE FROM run WHERE id = :run"), gone)

    problems = found(database)

    assert [(p.code, p.place) for p in problems] == [("number_gap", "local/run 2026-02-03/2")]


@pytest.mark.parametrize(
    ("statement", "code"),
    [
        ("UPDATE run SET number = 'one' WHERE number = 1", "run_row"),
        ("UPDATE run SET plan_for = 'soon' WHERE number = 1", "run_row"),
        ("UPDATE run SET created_at = 'yesterday' WHERE number = 1", "run_row"),
        ("UPDATE event SET seq = 'two' WHERE seq = 2", "chain"),
        ("UPDATE event SET format = 1.5 WHERE seq = 1", "chain"),
        ("UPDATE event_payload SET salt = 'sixteen letters.' WHERE seq = 1", "chain"),
        ("UPDATE event_payload SET payload = '[1' WHERE seq = 1", "chain"),
        ("UPDATE event_payload SET payload = ' ' || payload WHERE seq = 1", "chain"),
        ("UPDATE blob SET bytes = 'text' WHERE part = 0", "blob"),
        ("UPDATE blob SET part = 'first'", "blob"),
        ("UPDATE run_dispatch SET crashes = 'none'", "dispatch_row"),
        ("UPDATE run_ending SET seconds = '{'", "ending_row"),
        ("UPDATE run_ending SET state = 'lost'", "ending_row"),
        ("UPDATE plan_line SET position = 'top' WHERE position = 0", "plan_line"),
    ],
)
def test_values_that_cannot_even_be_read_are_problems_not_crashes(
    database: Database,
    unguarded: Engine,
    statement: str,
    code: str,
) -> None:
    """SQLite keeps any text in any column, once its CHECKs are off; PostgreSQL refuses by type."""
    if not _takes(unguarded, statement, sqlite=database.is_sqlite):
        return

    verdict = check_store(database)

    assert verdict.verdict == "broken"
    assert code in [problem.code for problem in verdict.problems]


def _takes(engine: Engine, statement: str, *, sqlite: bool) -> bool:
    """Run ``statement`` with every check off; return whether PostgreSQL took it. SQLite must."""
    with engine.connect() as connection:
        if sqlite:
            connection.exec_driver_sql("PRAGMA ignore_check_constraints = ON")
        try:
            connection.exec_driver_sql(statement)
        except DBAPIError:
            if sqlite:
                raise
            return False
        connection.commit()
        return True


def test_contents_that_contradict_their_digests_are_found(
    database: Database,
    unguarded: Engine,
    runs: list[Run],
) -> None:
    """A whole true blob in the place of another is still not what was digested."""
    first, second = (run.request_digest for run in runs[:2])
    nowhere = "sha-256:" + "f" * 64
    with unguarded.begin() as connection:
        for before, after in ((first, nowhere), (second, first), (nowhere, second)):
            connection.execute(
                text("UPDATE blob SET digest = :a WHERE digest = :b"),
                {"a": after, "b": before},
            )

    places = {problem.place for problem in found(database) if problem.code == "blob"}

    assert places == {f"local/blob {digest}" for digest in (first, second)}


@pytest.mark.parametrize(
    ("statement", "code"),
    [
        ("DELETE FROM blob WHERE digest = :d AND part = 0", "blob"),
        ("DELETE FROM blob WHERE digest = :d AND part = 2", "blob_missing"),
        ("UPDATE blob SET part = 3, parts = 4 WHERE digest = :d AND part = 2", "blob"),
        ("UPDATE blob SET unpacked_bytes = 1 WHERE digest = :d AND part = 1", "blob"),
    ],
)
def test_part_that_is_missing_or_misplaced_is_found(
    database: Database,
    unguarded: Engine,
    tmp_path: Path,
    statement: str,
    code: str,
) -> None:
    """Large contents lie in parts, and each may be tampered with alone."""
    store = SqlStore(database, SystemClock())
    run = submitted(store, tmp_path / "large", body=os.urandom(2 * PART_BYTES + 1))
    with unguarded.begin() as connection:
        connection.execute(
            text(statement),
            {"d": run.request_digest},
        )

    problems = found(database)

    assert (code, f"local/blob {run.request_digest}") in [(p.code, p.place) for p in problems]


def test_store_that_cannot_be_read_is_neither_intact_nor_broken(
    empty_url: str,
    tmp_path: Path,
) -> None:
    """Exit code 2, not 1: nothing was found out about the facts."""
    no_database = tmp_path / "none.db"
    no_database.write_bytes(b"this is no database" * 100)

    verdicts = [audit(url) for url in (empty_url, f"sqlite:///{no_database}", "mysql://x/y")]

    assert [verdict.verdict for verdict in verdicts] == ["unreadable"] * 3
    assert [len(verdict.problems) for verdict in verdicts] == [1, 1, 1]


def test_missing_trigger_is_a_problem_of_its_own(database: Database) -> None:
    """Whoever switched a trigger off may have been about to change something."""
    verdict = check_store(database)

    assert verdict.verdict == "broken"
    assert {problem.code for problem in verdict.problems} == {"trigger"}
    assert len(verdict.problems) >= len(TABLES)


def test_every_table_with_rows_of_a_run_is_looked_through_for_rows_without_one() -> None:
    """A table that is added later cannot be forgotten; the cache is nobody's record."""
    listed = {table.__tablename__ for table in OF_A_RUN}
    with_run = {name for name, table in Base.metadata.tables.items() if "run" in table.columns}

    assert listed == with_run - {WarmStartRow.__tablename__}
