"""Fixtures: every test of the store runs on SQLite and on PostgreSQL.

A test that finds no PostgreSQL fails and says how to get one; it is never skipped.
"""

import itertools
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from datetime import UTC, datetime, timedelta
from pathlib import Path

import psycopg
import pytest
from psycopg import sql

from service.store.database import Database, open_database
from service.store.migrate import migrate
from service.store.sql_store import SqlStore
from tests.servers import PostgresServer, postgres

Opened = Callable[[str], Database]
DATABASES = ("sqlite", "postgresql")
_TEMPLATE = "lanewright_template"
_names = itertools.count(1)


class FakeClock:
    """A clock that stands still until it is told otherwise."""

    def __init__(self) -> None:
        """Begin at a moment that has six decimals."""
        self.moment = datetime(2026, 2, 3, 15, 0, 0, 250_000, tzinfo=UTC)

    def now(self) -> datetime:
        """Return the moment it stands at."""
        return self.moment

    def advance(self, seconds: float) -> None:
        """Go forward."""
        self.moment += timedelta(seconds=seconds)


@pytest.fixture(scope="session")
def postgres_server() -> Iterator[PostgresServer]:
    """Run one PostgreSQL for all tests that ask for it."""
    with postgres() as server:
        yield server


@pytest.fixture(scope="session")
def postgres_template(postgres_server: PostgresServer) -> str:
    """Return a migrated database of the server, to copy fresh ones from."""
    new_postgres_database(postgres_server, _TEMPLATE)
    migrate(postgres_server.url(_TEMPLATE))
    return _TEMPLATE


def new_postgres_database(
    server: PostgresServer,
    name: str,
    *,
    template: str = "template0",
) -> str:
    """Create a database and return its address."""
    with psycopg.connect(plain(server.url("postgres")), autocommit=True) as connection:
        connection.execute(
            sql.SQL("CREATE DATABASE {} TEMPLATE {}").format(
                sql.Identifier(name),
                sql.Identifier(template),
            ),
        )
    return server.url(name)


@contextmanager
def postgres_database(
    server: PostgresServer,
    prefix: str,
    *,
    template: str = "template0",
) -> Iterator[str]:
    """Give a database for the length of the block; hundreds of them would fill a small disk."""
    name = f"{prefix}_{next(_names)}"
    yield new_postgres_database(server, name, template=template)
    with psycopg.connect(plain(server.url("postgres")), autocommit=True) as connection:
        connection.execute(
            sql.SQL("DROP DATABASE {} WITH (FORCE)").format(sql.Identifier(name)),
        )


def plain(url: str) -> str:
    """Return the address as the driver itself reads it."""
    return url.replace("postgresql+psycopg://", "postgresql://")


@pytest.fixture(params=DATABASES)
def database_kind(request: pytest.FixtureRequest) -> str:
    """Name the database of this test; each test runs once with each."""
    return str(request.param)


@pytest.fixture
def empty_url(
    database_kind: str,
    request: pytest.FixtureRequest,
    tmp_path: Path,
) -> Iterator[str]:
    """Return the address of a database without tables."""
    if database_kind == "sqlite":
        yield f"sqlite:///{tmp_path / 'lanewright.db'}"
        return
    server: PostgresServer = request.getfixturevalue("postgres_server")
    with postgres_database(server, "empty") as url:
        yield url


@pytest.fixture
def database_url(
    database_kind: str,
    request: pytest.FixtureRequest,
    tmp_path: Path,
) -> Iterator[str]:
    """Return the address of a fresh, migrated database."""
    if database_kind == "sqlite":
        url = f"sqlite:///{tmp_path / 'lanewright.db'}"
        migrate(url)
        yield url
        return
    template: str = request.getfixturevalue("postgres_template")
    server: PostgresServer = request.getfixturevalue("postgres_server")
    with postgres_database(server, "test", template=template) as url:
        yield url


@pytest.fixture
def opened() -> Iterator[Opened]:
    """Return a function that opens a database until the test is over."""
    databases: list[Database] = []

    def open_until_the_end(url: str) -> Database:
        databases.append(open_database(url))
        return databases[-1]

    yield open_until_the_end
    for database in databases:
        database.close()


@pytest.fixture
def database(database_url: str, opened: Opened) -> Database:
    """Open the fresh database."""
    return opened(database_url)


@pytest.fixture
def clock() -> FakeClock:
    """Return a clock that stands still; PostgreSQL has its own time and does not look at it."""
    return FakeClock()


@pytest.fixture
def store(database: Database, clock: FakeClock) -> SqlStore:
    """Return a store over the fresh database."""
    return SqlStore(database, clock)
