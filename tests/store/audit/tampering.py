"""A filled store for tests of the audit, and the means to tamper with it."""

from collections.abc import Mapping
from datetime import date, datetime, timedelta
from pathlib import Path
from typing import Any

from sqlalchemy import ColumnElement, Engine, Table, and_

from service.planning.outcome import FailureReason
from service.runs.run import LOCAL, Run
from service.store.audit import Problem, check_store
from service.store.database import Database
from service.store.sql_store import SqlStore, SystemClock
from service.store.tables import CACHE_TABLE, Base
from tests.run_factories import FakePlanner, execution, outcome, submitted

# A cache is nobody's record: see tests/store/test_warm_starts.py for what damage to it does.
TABLES = sorted(set(Base.metadata.tables) - {CACHE_TABLE})
# What only fences, or serves whoever works on a run for the moment; history does not know it.
UNRECORDED = {
    ("run_dispatch", "token"),
    ("run_dispatch", "finished_token"),
    ("run_dispatch", "lease_until"),
    ("run_dispatch", "progress"),
    ("run_dispatch", "likeness"),
    ("run_dispatch", "memory_bytes"),
}
# With one part, as here, there is no other number for it; see the test of parts below.
HELD_BY_A_CHECK = {("blob", "part")}

Row = Mapping[str, Any]


def fill(database: Database, folder: Path) -> list[Run]:
    """Fill a store: a plan, a run that failed, one without a plan, one that waits, an access."""
    store = SqlStore(database, SystemClock())
    scratch = folder / "scratch"
    planned = submitted(store, folder / "1", body=b"1", deadline_seconds=900)
    execution(store, scratch)(planned.id)
    failed = submitted(store, folder / "2", body=b"2", deadline_seconds=900)
    planner = FakePlanner(outcome=outcome("failed", reason=FailureReason.INTERNAL, detail="x"))
    execution(store, scratch, planner)(failed.id)
    no_plan = submitted(store, folder / "3", body=b"3", deadline_seconds=900)
    planner = FakePlanner(outcome=outcome("no_plan"), lines=0)
    execution(store, scratch, planner)(no_plan.id)
    waiting = submitted(store, folder / "4", body=b"4", deadline_seconds=900)
    with store.transaction() as transaction:
        transaction.append("access", "read", LOCAL, {"run": planned.id})
    assert check_store(database).problems == ()
    return [planned, failed, no_plan, waiting]


def disarm(database: Database) -> None:
    """Do what only an owner can: take the triggers away."""
    with database.engine.begin() as connection:
        if database.is_sqlite:
            statement = "SELECT name FROM sqlite_master WHERE type = 'trigger'"
            for (name,) in connection.exec_driver_sql(statement).all():
                connection.exec_driver_sql(f"DROP TRIGGER {name}")
        else:
            for table in TABLES:
                connection.exec_driver_sql(f"ALTER TABLE {table} DISABLE TRIGGER ALL")


def found(database: Database) -> list[Problem]:
    """Return what the audit finds beside the missing triggers."""
    return [problem for problem in check_store(database).problems if problem.code != "trigger"]


def other(value: object) -> object:
    """Return a value of the same kind that differs as little as it can."""
    if isinstance(value, bool):
        raise TypeError(value)
    if isinstance(value, int):
        return value + 1
    if isinstance(value, bytes):
        return value[:-1] + bytes([value[-1] ^ 1]) if value else b"x"
    if isinstance(value, datetime):
        return value + timedelta(microseconds=1)
    if isinstance(value, date):
        return value + timedelta(days=1)
    if isinstance(value, str):
        return _other_text(value)
    return None


def _other_text(value: str) -> str:
    if value.startswith("sha-256:"):
        return value[:-1] + ("0" if value[-1] != "0" else "1")
    if value.endswith("Z") and len(value) == 27:
        return value[:-2] + ("0" if value[-2] != "0" else "1") + "Z"
    return value + "x"


def names(row: Row, changed: object) -> set[str]:
    """Return what may name a row: its run, stream or digest, before or after the change."""
    keys = {"id", "run", "stream", "digest", "number"} & row.keys()
    return {str(row[key]) for key in keys} | {str(changed)}


def rows_of(engine: Engine, table: Table) -> list[Row]:
    """Return every row of ``table`` in the order of its key, as pairs of name and value."""
    key = list(table.primary_key.columns)
    with engine.connect() as connection:
        return [dict(row) for row in connection.execute(table.select().order_by(*key)).mappings()]


def some(rows: list[Row], *, long: bool) -> list[Row]:
    """Return the first and the last; with ``--long`` all of them."""
    return rows if long else [rows[n] for n in sorted({0, len(rows) - 1})]


def at(table: Table, row: Row) -> ColumnElement[bool]:
    """Return the condition that picks ``row`` by its key."""
    return and_(*(column == row[column.name] for column in table.primary_key.columns))
