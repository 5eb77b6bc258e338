"""Opening a database: the settings under which what was acknowledged survives.

SQLite: write-ahead log with every commit forced to disk, and one writer at a time in this process,
which waits its turn instead of failing. PostgreSQL: psycopg 3, connections probed before use.
"""

import sqlite3
import threading
from contextlib import AbstractContextManager, nullcontext
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Final

from sqlalchemy import URL, Connection, Engine, create_engine, event, make_url
from sqlalchemy.engine.interfaces import DBAPIConnection
from sqlalchemy.exc import ArgumentError

from service.store.local_disk import network_file_system

if TYPE_CHECKING:
    from sqlalchemy.pool import ConnectionPoolEntry

READ_ONLY: Final = "lanewright_read_only"
"""Execution option of a connection that only reads."""

# UPDATE ... RETURNING came with 3.35 (2021).
_SQLITE_VERSION_MIN: Final = (3, 35, 0)
_SQLITE_BUSY_SECONDS: Final = 30.0
_CONNECT_SECONDS: Final = 3
# A server that vanished without a word is noticed after half a minute instead of two hours.
_NOTICE_SILENCE: Final = {
    "keepalives_idle": 15,
    "keepalives_interval": 5,
    "keepalives_count": 3,
    "tcp_user_timeout": 30_000,
}
_POOL_SECONDS: Final = 3.0
_POOL_SIZE: Final = 16
_LOG_BYTES_KEPT: Final = 16 * 2**20


class DatabaseRefused(Exception):  # noqa: N818 - named for the fact, like every error here
    """The database cannot be used as named; the text says why and what to do."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Database:
    """An open database: the pool of connections, and whose turn it is to write."""

    engine: Engine
    writing: AbstractContextManager[object]

    @property
    def is_sqlite(self) -> bool:
        """Whether this is SQLite, where time comes from the clock and writers queue here."""
        return self.engine.dialect.name == "sqlite"

    def close(self) -> None:
        """Close every pooled connection."""
        self.engine.dispose()


def database_url(text: str) -> URL:
    """Return ``text`` as a URL of one of the two databases; raise ``DatabaseRefused`` otherwise."""
    try:
        url = make_url(text)
    except ArgumentError as error:
        # The text itself may hold a password, so it is not repeated.
        raise DatabaseRefused("the database is named by a URL, such as sqlite:///FILE") from error
    if url.drivername in {"postgresql", "postgresql+psycopg"}:
        return url.set(drivername="postgresql+psycopg")
    if url.drivername in {"sqlite", "sqlite+pysqlite"}:
        if url.database in {None, "", ":memory:"} or url.query:
            raise DatabaseRefused("an SQLite database is a plain file: sqlite:///FILE")
        return url
    raise DatabaseRefused(f"no database of kind {url.drivername!r}: use sqlite or postgresql")


def sqlite_file(url: URL) -> Path | None:
    """Return the file of an SQLite database, None for PostgreSQL."""
    return Path(str(url.database)) if url.get_backend_name() == "sqlite" else None


def open_database(text: str) -> Database:
    """Open the database at URL ``text``; an SQLite file and its folder are made when missing."""
    url = database_url(text)
    file = sqlite_file(url)
    if file is None:
        return Database(engine=_postgresql(url), writing=nullcontext())
    return Database(engine=_sqlite(url, file), writing=threading.Lock())


def _postgresql(url: URL) -> Engine:
    return create_engine(
        url,
        pool_pre_ping=True,
        pool_timeout=_POOL_SECONDS,
        pool_size=_POOL_SIZE,
        max_overflow=0,
        connect_args={"connect_timeout": _CONNECT_SECONDS, **_NOTICE_SILENCE},
    )


def _sqlite(url: URL, file: Path) -> Engine:
    if sqlite3.sqlite_version_info < _SQLITE_VERSION_MIN:
        raise DatabaseRefused(
            f"this Python has SQLite {sqlite3.sqlite_version}; 3.35 or later is needed",
        )
    file.parent.mkdir(parents=True, exist_ok=True)
    kind = network_file_system(file.parent)
    if kind is not None:
        raise DatabaseRefused(
            f"{file.parent} lies on a network file system ({kind}), where SQLite loses data: "
            "use a folder on a local disk, or PostgreSQL",
        )
    engine = create_engine(
        url,
        pool_timeout=_SQLITE_BUSY_SECONDS,
        pool_size=_POOL_SIZE,
        max_overflow=0,
        connect_args={"timeout": _SQLITE_BUSY_SECONDS},
    )
    event.listen(engine, "connect", _prepare_sqlite)
    event.listen(engine, "begin", _begin_sqlite)
    return engine


def _prepare_sqlite(connection: DBAPIConnection, entry: "ConnectionPoolEntry") -> None:
    del entry
    # The driver would begin transactions by itself, deferred: read first, fail on the first write.
    connection.isolation_level = None
    cursor = connection.cursor()
    for pragma in (
        "journal_mode = WAL",
        # NORMAL forces the log to disk only now and then: power loss would lose acknowledged runs.
        "synchronous = FULL",
        "foreign_keys = ON",
        # Without it, INSERT OR REPLACE would remove a fact and fire no trigger.
        "recursive_triggers = ON",
        # After a large network the log would keep its size for ever.
        f"journal_size_limit = {_LOG_BYTES_KEPT}",
    ):
        cursor.execute(f"PRAGMA {pragma}")
    cursor.close()


def _begin_sqlite(connection: Connection) -> None:
    read_only = bool(connection.get_execution_options().get(READ_ONLY, False))
    connection.exec_driver_sql(f"PRAGMA query_only = {'ON' if read_only else 'OFF'}")
    connection.exec_driver_sql("BEGIN" if read_only else "BEGIN IMMEDIATE")
