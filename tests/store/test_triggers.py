"""Facts are append-only, and a run makes only legal moves, whoever speaks to the database."""

from pathlib import Path

import pytest
from sqlalchemy import text
from sqlalchemy.exc import DBAPIError

from service.runs.lifecycle import FINAL, may_move
from service.runs.run import RunState
from service.store.database import Database
from service.store.sql_store import SqlStore
from service.store.tables import DISPATCH_TABLE, FACT_TABLES, Base
from tests.run_factories import execution, submitted


@pytest.fixture
def filled(store: SqlStore, database: Database, tmp_path: Path) -> Database:
    """Return a database with a row in every table."""
    run = submitted(store, tmp_path / "in")
    execution(store, tmp_path / "scratch")(run.id)
    with database.engine.connect() as connection:
        for table in Base.metadata.tables:
            count = connection.scalar(text(f"SELECT count(*) FROM {table}"))  # noqa: S608 - our own
            assert count, f"{table} has no row to be refused"
    return database


def refusal(database: Database, statement: str) -> str:
    """Return the words in which the database refuses ``statement``."""
    with pytest.raises(DBAPIError) as refused, database.engine.begin() as connection:
        connection.exec_driver_sql(statement)
    return str(refused.value.orig)


@pytest.mark.parametrize("table", FACT_TABLES)
def test_no_fact_is_ever_updated(filled: Database, table: str) -> None:
    """Each column of each fact table: a trigger that watches only some would miss the rest."""
    for column in Base.metadata.tables[table].columns:
        quoted = f'"{column.name}"'

        said = refusal(filled, f"UPDATE {table} SET {quoted} = {quoted}")  # noqa: S608 - our own

        assert "facts are append-only" in said


@pytest.mark.parametrize("table", [*FACT_TABLES, DISPATCH_TABLE])
def test_no_row_is_ever_deleted(filled: Database, table: str) -> None:
    """Retention, when it comes, erases payloads by a way of its own."""
    said = refusal(filled, f"DELETE FROM {table}")  # noqa: S608 - our own table

    assert "facts are append-only" in said


@pytest.mark.parametrize("table", [*FACT_TABLES, DISPATCH_TABLE])
def test_no_table_is_emptied_by_a_back_way(filled: Database, table: str) -> None:
    """PostgreSQL's TRUNCATE and SQLite's INSERT OR REPLACE are no DELETE, and lose as much."""
    statement = f"TRUNCATE {table} CASCADE"
    if filled.is_sqlite:
        statement = f"INSERT OR REPLACE INTO {table} SELECT * FROM {table}"  # noqa: S608 - our own

    said = refusal(filled, statement)

    assert "facts are append-only" in said


def test_replica_mode_switches_no_trigger_off(filled: Database) -> None:
    """On PostgreSQL a superuser's session could ask for it; the triggers fire always."""
    if filled.is_sqlite:
        with filled.engine.connect() as connection:
            assert connection.exec_driver_sql("PRAGMA recursive_triggers").scalar() == 1
        return
    said = refusal(
        filled,
        "SET session_replication_role = replica; UPDATE event SET kind = kind",
    )

    assert "append-only" in said


@pytest.mark.parametrize("column", ["tenant", "run", "deadline_at"])
def test_what_a_dispatch_row_belongs_to_never_changes(
    store: SqlStore,
    database: Database,
    tmp_path: Path,
    column: str,
) -> None:
    """A run that could be given another deadline could be kept from failing by it."""
    submitted(store, tmp_path / "in")

    said = refusal(
        database,
        f"UPDATE run_dispatch SET {column} = substr({column}, 1, 26) || '9'",  # noqa: S608 - our own
    )

    assert "no legal move" in said


def test_counters_of_a_dispatch_row_never_go_back(
    store: SqlStore,
    database: Database,
    tmp_path: Path,
) -> None:
    """A poisonous run whose crashes are forgotten would be tried for ever."""
    submitted(store, tmp_path / "in")
    claim = "UPDATE run_dispatch SET state = 'running', attempt = 1, crashes = 1, token = 't'"
    with database.engine.begin() as connection:
        connection.exec_driver_sql(f"{claim}, lease_until = deadline_at")

    for counter in ("attempt", "crashes"):
        said = refusal(database, f"UPDATE run_dispatch SET {counter} = 0")  # noqa: S608 - our own

        assert "no legal move" in said


def test_database_and_lifecycle_agree_on_every_move(
    store: SqlStore,
    database: Database,
    tmp_path: Path,
) -> None:
    """The moves are written down twice, in Python and in a migration; here they must meet."""
    submitted(store, tmp_path / "in")
    pairs = [(source, target) for source in RunState for target in RunState]

    allowed = {pair for pair in pairs if _allows(database, *pair)}

    assert allowed == {pair for pair in pairs if may_move(*pair) and pair[0] not in FINAL}
    assert len(allowed) == 9


def _allows(database: Database, source: RunState, target: RunState) -> bool:
    """Return whether the database lets a run go from ``source`` to ``target``; undo it."""
    with database.engine.connect() as connection, connection.begin() as transaction:
        for attempt, state in enumerate(WAYS[source], start=1):
            connection.exec_driver_sql(_move(state, attempt=attempt))
        refused = None
        try:
            connection.exec_driver_sql(_move(target, attempt=3))
        except DBAPIError as error:
            refused = str(error.orig)
        transaction.rollback()
    if refused is not None and "no legal move" not in refused:
        raise AssertionError(refused)
    return refused is None


WAYS = {
    RunState.WAITING: (),
    RunState.RUNNING: (RunState.RUNNING,),
    **{state: (RunState.RUNNING, state) for state in FINAL},
}


def _move(state: RunState, *, attempt: int) -> str:
    lease = "'t', lease_until = deadline_at"
    held = lease if state is RunState.RUNNING else "NULL, lease_until = NULL"
    values = f"state = '{state}', attempt = {attempt}, token = {held}"
    return f"UPDATE run_dispatch SET {values}"  # noqa: S608 - our own


@pytest.mark.parametrize("table", [*FACT_TABLES, DISPATCH_TABLE])
def test_every_key_begins_with_the_tenant_and_names_who(table: str) -> None:
    """A tenant's rows must never be reached through a key that forgets whose they are."""
    columns = Base.metadata.tables[table].columns
    key = [column.name for column in Base.metadata.tables[table].primary_key]

    who = {"tenant", "actor", "submitted_by", "authentication"} & set(columns.keys())

    assert key[0] == "tenant"
    assert [name for name in who if columns[name].nullable] == []
