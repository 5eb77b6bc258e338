"""The rights of the service on PostgreSQL: enough for every use case, and none to change facts."""

from pathlib import Path

import psycopg
import pytest
from sqlalchemy import text
from sqlalchemy.exc import DBAPIError

from service.runs.recover import Recover
from service.runs.run import RunState
from service.runs.sweep import Sweep
from service.runs.watch import Watch
from service.store.audit import check_store
from service.store.service_role import service_role_sql
from service.store.sql_store import SqlStore, SystemClock
from service.store.tables import DISPATCH_TABLE, FACT_TABLES
from tests.databases import Opened, new_postgres_database, plain
from tests.run_factories import FakePlanner, execution, submitted
from tests.servers import PostgresServer

ROLE = 'the "service"'


@pytest.fixture
def role_url(postgres_server: PostgresServer, postgres_template: str) -> str:
    """Return the address of a migrated database, as a role with the documented rights."""
    owner = new_postgres_database(postgres_server, "roles", template=postgres_template)
    with psycopg.connect(plain(owner), autocommit=True) as connection:
        connection.execute('CREATE ROLE "the ""service""" LOGIN')
        for statement in service_role_sql(ROLE):
            connection.execute(statement.encode())
    return postgres_server.url("roles", user="the%20%22service%22")


def test_service_role_can_do_its_work_and_change_no_fact(
    role_url: str,
    opened: Opened,
    tmp_path: Path,
) -> None:
    """Every use case runs with these rights; dropping a trigger or deleting a fact does not."""
    database = opened(role_url)
    store = SqlStore(database, SystemClock())
    with database.engine.connect() as connection:
        who = connection.scalar(text("SELECT current_user"))
    run = submitted(store, tmp_path / "in")
    watch = Watch(store=store, lease_seconds=30)
    planner = FakePlanner(instead=lambda claim: watch([claim.token]))

    state = execution(store, tmp_path / "scratch", planner)(run.id)
    Sweep(store=store)()
    Recover(store=store)()

    assert who == ROLE
    assert state is RunState.PLANNED
    assert store.missing() == []
    assert check_store(database).verdict == "intact"
    forbidden = [
        *(f"DELETE FROM {table}" for table in (*FACT_TABLES, DISPATCH_TABLE)),  # noqa: S608 - our own
        *(f"UPDATE {table} SET tenant = tenant" for table in FACT_TABLES),  # noqa: S608 - our own
        *(f"TRUNCATE {table} CASCADE" for table in (*FACT_TABLES, DISPATCH_TABLE)),
        "UPDATE run_dispatch SET deadline_at = deadline_at",
        "DROP TRIGGER event_refuse ON event",
        "ALTER TABLE event DISABLE TRIGGER ALL",
        "DROP TABLE event CASCADE",
        "UPDATE alembic_version SET version_num = '9'",
        (
            "CREATE OR REPLACE FUNCTION lanewright_refuse() RETURNS trigger LANGUAGE plpgsql"
            " AS $$ BEGIN RETURN NULL; END $$"
        ),
    ]
    for statement in forbidden:
        with (
            pytest.raises(DBAPIError, match=r"permission denied|must be owner"),
            database.engine.begin() as connection,
        ):
            connection.exec_driver_sql(statement)
