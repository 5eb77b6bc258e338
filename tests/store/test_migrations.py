"""Migrations: what they make is what the models say, on both databases, up and down."""

from pathlib import Path

import pytest
from alembic.autogenerate import compare_metadata
from alembic.migration import MigrationContext
from sqlalchemy import Connection, inspect, text

import service.store.migrate as migrations
from service.runs.faults import StoreUnavailable
from service.store.database import Database
from service.store.migrate import (
    MigrationBroken,
    downgrade_database,
    migrate,
    migrate_database,
    migrations_folder,
)
from service.store.sql_store import SqlStore
from service.store.tables import CACHE_TABLE, DISPATCH_TABLE, FACT_TABLES, Base
from service.store.trigger_texts import postgresql_triggers, sqlite_triggers
from tests.databases import FakeClock, Opened
from tests.servers import free_port


def tables(database: Database) -> set[str]:
    """Return the names of the tables there are, without the one that Alembic keeps."""
    return set(inspect(database.engine).get_table_names()) - {"alembic_version"}


def schema(connection: Connection) -> list[tuple[object, ...]]:
    """Return every column, constraint and index as the database itself describes it."""
    if connection.dialect.name == "sqlite":
        rows = connection.execute(
            text(
                'SELECT m.name, c.name, c.type, c."notnull", c.pk, c.dflt_value'
                " FROM sqlite_master m JOIN pragma_table_info(m.name) c"
                " WHERE m.type = 'table' AND m.name <> 'alembic_version'"
                ' UNION ALL SELECT m.name, i.name, group_concat(x.name), i."unique", 0, NULL'
                " FROM sqlite_master m JOIN pragma_index_list(m.name) i"
                " JOIN pragma_index_info(i.name) x"
                " WHERE m.type = 'table' AND m.name <> 'alembic_version' GROUP BY m.name, i.name",
            ),
        )
        found = [tuple(row) for row in rows]
        for name in sorted({str(row[0]) for row in found}):
            inspector = inspect(connection)
            found += [
                (name, check["name"], " ".join(str(check["sqltext"]).split()))
                for check in inspector.get_check_constraints(name)
            ]
            found += [
                (name, str(key["constrained_columns"]), key["referred_table"])
                for key in inspector.get_foreign_keys(name)
            ]
        return sorted(found, key=str)
    rows = connection.execute(
        text(
            "SELECT c.relname, a.attname, format_type(a.atttypid, a.atttypmod), a.attnotnull::text,"
            " coalesce(l.collname, '') FROM pg_attribute a JOIN pg_class c ON c.oid = a.attrelid"
            " JOIN pg_namespace n ON n.oid = c.relnamespace"
            " LEFT JOIN pg_collation l ON l.oid = a.attcollation"
            " WHERE n.nspname = current_schema() AND c.relkind = 'r' AND a.attnum > 0"
            " AND c.relname <> 'alembic_version'"
            " UNION ALL SELECT r.relname, k.conname, pg_get_constraintdef(k.oid), '', ''"
            " FROM pg_constraint k JOIN pg_class r ON r.oid = k.conrelid"
            " JOIN pg_namespace n ON n.oid = r.relnamespace"
            " WHERE n.nspname = current_schema() AND r.relname <> 'alembic_version'"
            " UNION ALL SELECT tablename, indexname, indexdef, '', '' FROM pg_indexes"
            " WHERE schemaname = current_schema() AND tablename <> 'alembic_version'",
        ),
    )
    return sorted((tuple(row) for row in rows), key=str)


def test_migrating_twice_applies_everything_once(empty_url: str, opened: Opened) -> None:
    """A second start must find nothing to do; until then the store says what is missing."""
    database = opened(empty_url)
    store = SqlStore(database, FakeClock())
    missing_before = store.missing()

    first = migrate(empty_url)
    second = migrate(empty_url)

    assert first == ["0001", "0002"]
    assert missing_before == ["migrations 0001, 0002: run lanewright migrate"]
    assert (second, store.missing()) == ([], [])


def test_migrating_a_database_that_is_away_says_so(opened: Opened) -> None:
    """A command can say it in a sentence; a traceback of the driver would say it to nobody."""
    database = opened(f"postgresql://nobody@127.0.0.1:{free_port()}/x")

    with pytest.raises(StoreUnavailable):
        migrate_database(database)


def test_tables_are_those_of_the_models_and_go_again(empty_url: str, opened: Opened) -> None:
    """A migration that cannot be taken back was not understood when it was written."""
    migrate(empty_url)
    database = opened(empty_url)
    there = tables(database)

    downgrade_database(database)
    gone = tables(database)
    migrate_database(database)

    assert there == {*FACT_TABLES, DISPATCH_TABLE, CACHE_TABLE}
    assert gone == set()
    assert tables(database) == there
    assert SqlStore(database, FakeClock()).missing() == []


def test_migrated_schema_is_that_of_the_models(
    empty_url: str,
    opened: Opened,
    request: pytest.FixtureRequest,
) -> None:
    """Models and migrations are written apart; whatever differs is a fault of one of them.

    Alembic compares tables, columns and types; it is blind for CHECKs and collations, so the
    database's own description of both is compared as well.
    """
    migrated = opened(str(request.getfixturevalue("database_url")))
    modelled = opened(_other(empty_url))
    Base.metadata.create_all(modelled.engine)

    with migrated.engine.connect() as here, modelled.engine.connect() as there:
        drift = compare_metadata(
            MigrationContext.configure(here, opts={"compare_type": True}),
            Base.metadata,
        )
        described, expected = schema(here), schema(there)

    assert drift == []
    assert len(expected) > 100, "the description sees columns, constraints and indexes"
    assert described == expected


def test_drift_would_be_seen(empty_url: str, opened: Opened) -> None:
    """The comparison above must be able to fail: here one CHECK of the models is missing."""
    database = opened(empty_url)
    Base.metadata.create_all(database.engine)
    with database.engine.begin() as connection:
        before = schema(connection)
        connection.execute(text("DROP TABLE plan_line"))
        connection.execute(
            text(
                "CREATE TABLE plan_line (tenant TEXT NOT NULL, run TEXT NOT NULL,"
                " position INTEGER NOT NULL, lane TEXT, origin TEXT NOT NULL,"
                " destination TEXT NOT NULL, item TEXT NOT NULL, quantity TEXT NOT NULL)",
            ),
        )

        after = schema(connection)

    assert after != before


def test_missing_trigger_is_noticed_after_a_migration(database: Database) -> None:
    """Rebuilding an SQLite table drops its triggers without a word; it must not stay unseen."""
    drop = "DROP TRIGGER event_refuse_update"
    if not database.is_sqlite:
        drop = "DROP TRIGGER event_refuse ON event"
    with database.engine.begin() as connection:
        connection.execute(text(drop))

    with pytest.raises(MigrationBroken, match=r"trigger event_refuse\S* on event is missing"):
        migrate_database(database)


TAMPERED_TRIGGERS = {
    "missing": (
        ("DROP TRIGGER run_refuse_delete",),
        "DROP TRIGGER run_refuse ON run",
        "on run is missing",
    ),
    "empty": (
        (
            "DROP TRIGGER run_dispatch_move",
            "CREATE TRIGGER run_dispatch_move BEFORE UPDATE ON run_dispatch BEGIN SELECT 1; END",
        ),
        (
            "CREATE OR REPLACE FUNCTION lanewright_dispatch() RETURNS trigger LANGUAGE plpgsql"
            " AS $$ BEGIN RETURN NEW; END $$"
        ),
        "is changed",
    ),
    "one too many": (
        ("CREATE TRIGGER stranger AFTER INSERT ON event BEGIN SELECT 1; END",),
        (
            "CREATE TRIGGER stranger AFTER INSERT ON event FOR EACH STATEMENT"
            " EXECUTE FUNCTION lanewright_refuse()"
        ),
        "trigger stranger on event is one that nobody knows",
    ),
    # SQLite cannot switch a trigger off without dropping it.
    "switched off": (
        ("DROP TRIGGER blob_refuse_update",),
        "ALTER TABLE blob DISABLE TRIGGER blob_refuse",
        "on blob is",
    ),
}


@pytest.mark.parametrize("how", TAMPERED_TRIGGERS)
def test_store_says_at_start_which_trigger_is_not_as_it_should_be(
    store: SqlStore,
    database: Database,
    how: str,
) -> None:
    """A store whose facts could be changed is not ready to take any."""
    on_sqlite, on_postgresql, said = TAMPERED_TRIGGERS[how]
    ready = store.missing()
    with database.engine.begin() as connection:
        for statement in on_sqlite if database.is_sqlite else (on_postgresql,):
            connection.exec_driver_sql(statement)

    missing = store.missing()

    assert ready == []
    assert len(missing) == 1
    assert said in missing[0]


def test_every_fact_table_has_its_triggers() -> None:
    """A table that a later release adds and forgets to protect must turn this red."""
    guarded = {(table, name) for table, name, _ in sqlite_triggers()}

    assert {(t, f"{t}_refuse_{verb}") for t in FACT_TABLES for verb in ("update", "delete")} | {
        (DISPATCH_TABLE, f"{DISPATCH_TABLE}_refuse_delete"),
        (DISPATCH_TABLE, f"{DISPATCH_TABLE}_move"),
    } == guarded
    assert {table for table, _, _ in postgresql_triggers()} == {*FACT_TABLES, DISPATCH_TABLE}


def test_a_database_ahead_of_this_release_is_no_fault(store: SqlStore, database: Database) -> None:
    """The next release migrates while this one still runs."""
    with database.engine.begin() as connection:
        connection.execute(text("UPDATE alembic_version SET version_num = '9999'"))

    assert store.missing() == []


def test_migrations_are_found_in_a_checkout_and_in_a_wheel(
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    """The wheel packs them beside the store, a checkout has them at the top."""
    in_checkout = migrations_folder()
    packed = tmp_path / "migrations"
    packed.mkdir()
    monkeypatch.setattr(migrations, "_HERE", tmp_path)

    assert (in_checkout / "env.py").is_file()
    assert in_checkout.parent == Path(__file__).parents[2]
    assert migrations_folder() == packed


def _other(url: str) -> str:
    # On SQLite both fixtures name one file of the test's own folder.
    return url.replace("lanewright.db", "modelled.db")
