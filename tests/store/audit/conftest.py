"""Copies of one filled database, for each test of the audit to tamper with."""

import shutil
from collections.abc import Iterator
from pathlib import Path

import pytest
from sqlalchemy import Engine, create_engine

from service.runs.run import Run
from service.store.database import Database, open_database
from service.store.migrate import migrate
from tests.databases import Opened, new_postgres_database, postgres_database
from tests.servers import PostgresServer
from tests.store.audit.tampering import disarm, fill


@pytest.fixture(scope="session")
def filled_sqlite(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, list[Run]]:
    """Return a filled SQLite file without triggers, to copy."""
    folder = tmp_path_factory.mktemp("filled")
    file = folder / "lanewright.db"
    migrate(f"sqlite:///{file}")
    database = open_database(f"sqlite:///{file}")
    runs = fill(database, folder)
    disarm(database)
    with database.engine.connect() as connection:
        connection.exec_driver_sql("ROLLBACK")  # a checkpoint needs to be outside of a transaction
        connection.exec_driver_sql("PRAGMA wal_checkpoint(TRUNCATE)")
        connection.exec_driver_sql("BEGIN")
    database.close()
    return file, runs


@pytest.fixture(scope="session")
def filled_postgres(
    postgres_server: PostgresServer,
    postgres_template: str,
    tmp_path_factory: pytest.TempPathFactory,
) -> tuple[str, list[Run]]:
    """Return the name of a filled PostgreSQL database without triggers, to copy."""
    url = new_postgres_database(postgres_server, "filled", template=postgres_template)
    database = open_database(url)
    runs = fill(database, tmp_path_factory.mktemp("filled"))
    disarm(database)
    database.close()
    return "filled", runs


@pytest.fixture
def copied(
    database_kind: str,
    request: pytest.FixtureRequest,
    tmp_path: Path,
    opened: Opened,
) -> Iterator[tuple[Database, list[Run]]]:
    """Return a copy of the filled database, for one test to tamper with."""
    if database_kind == "sqlite":
        file, runs = request.getfixturevalue("filled_sqlite")
        shutil.copy(file, tmp_path / "copy.db")
        yield opened(f"sqlite:///{tmp_path / 'copy.db'}"), runs
        return
    name, runs = request.getfixturevalue("filled_postgres")
    server: PostgresServer = request.getfixturevalue("postgres_server")
    with postgres_database(server, "copy", template=name) as url:
        yield opened(url), runs


@pytest.fixture
def database(copied: tuple[Database, list[Run]]) -> Database:
    """Return the copy as the audit opens it."""
    return copied[0]


@pytest.fixture
def runs(copied: tuple[Database, list[Run]]) -> list[Run]:
    """Return the runs in it: planned, failed, without a plan, waiting."""
    return copied[1]


@pytest.fixture
def unguarded(database: Database) -> Iterator[Engine]:
    """Give the copy to somebody who may do everything: foreign keys are off too."""
    engine = create_engine(database.engine.url)
    yield engine
    engine.dispose()
