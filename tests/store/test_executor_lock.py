"""The lock of PostgreSQL that lets one process alone execute runs."""

import itertools
from collections.abc import Callable

import psycopg
import pytest

from service.runs.faults import EngineLocked, StoreUnavailable
from service.store.database import Database
from service.store.executor_lock import DatabaseExecutorLock
from tests.databases import Opened, new_postgres_database, plain
from tests.servers import PostgresServer, free_port

Ended = Callable[[], int]
_names = itertools.count(1)


@pytest.fixture
def url(postgres_server: PostgresServer) -> str:
    """Return the address of a database of this test's own; the lock needs no tables."""
    return new_postgres_database(postgres_server, f"locked_{next(_names)}")


@pytest.fixture
def shared(url: str, opened: Opened) -> tuple[Database, Database]:
    """Return one database as two processes open it."""
    return opened(url), opened(url)


@pytest.fixture
def end_sessions(url: str, postgres_server: PostgresServer) -> Ended:
    """Return how an operator ends every session on the database; it counts them."""

    def end() -> int:
        with psycopg.connect(plain(postgres_server.url("postgres")), autocommit=True) as connection:
            return connection.execute(
                "SELECT pg_terminate_backend(pid, 5000) FROM pg_stat_activity WHERE datname = %s",
                [url.rpartition("/")[2]],
            ).rowcount

    return end


def test_second_process_is_refused_until_the_first_lets_go(
    shared: tuple[Database, Database],
) -> None:
    """Two executors would each take the other's running runs for leftovers of a crash."""
    one, other = shared
    first = DatabaseExecutorLock(one)

    with pytest.raises(EngineLocked, match="another process"):
        DatabaseExecutorLock(other)

    assert first.held()
    first.release()
    first.release()
    assert not first.held()
    second = DatabaseExecutorLock(other)
    assert second.held()
    second.release()


def test_lock_of_one_database_leaves_its_neighbour_alone(
    url: str, postgres_server: PostgresServer, opened: Opened
) -> None:
    """Several services may live on one server, each with a database of its own."""
    neighbour = new_postgres_database(postgres_server, f"locked_{next(_names)}")
    first, second = DatabaseExecutorLock(opened(url)), DatabaseExecutorLock(opened(neighbour))

    assert first.held()
    assert second.held()
    first.release()
    second.release()


def test_lock_whose_session_was_ended_is_taken_again(
    shared: tuple[Database, Database], end_sessions: Ended
) -> None:
    """A server that restarts must not stop the service for good."""
    one, other = shared
    lock = DatabaseExecutorLock(one)
    assert end_sessions() == 1

    assert lock.held()

    with pytest.raises(EngineLocked):
        DatabaseExecutorLock(other)
    lock.release()


def test_lock_that_somebody_else_took_meanwhile_is_not_held(
    shared: tuple[Database, Database], end_sessions: Ended
) -> None:
    """It comes back when the other lets go."""
    one, other = shared
    lock = DatabaseExecutorLock(one)
    assert end_sessions() == 1
    thief = DatabaseExecutorLock(other)

    meanwhile = lock.held()
    thief.release()

    assert not meanwhile
    assert lock.held()
    lock.release()


def test_holder_that_dies_lets_go(shared: tuple[Database, Database]) -> None:
    """The server sees the socket close, as it does when a process is killed."""
    one, other = shared
    first = DatabaseExecutorLock(one)
    assert first._connection is not None
    driver = first._connection.connection.dbapi_connection
    assert driver is not None

    driver.close()

    second = DatabaseExecutorLock(other)
    assert not first.held()
    second.release()


def test_server_that_is_away_is_said_so(opened: Opened) -> None:
    """Nobody knows then who holds it: the caller asks again later."""
    away = opened(f"postgresql://lanewright@127.0.0.1:{free_port()}/nowhere")

    with pytest.raises(StoreUnavailable):
        DatabaseExecutorLock(away)
