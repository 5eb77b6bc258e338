"""The lock that lets one process alone execute the runs of a PostgreSQL database."""

import contextlib
from typing import Final

from sqlalchemy import Connection, text
from sqlalchemy.exc import DBAPIError

from service.runs.faults import EngineLocked
from service.store.database import Database
from service.store.reaching import reaching

# Any number serves, as long as nobody else in this database takes it.
_EXECUTOR_LOCK: Final = 5_072_615_443_021_878
# The server keeps the lock of a machine that vanished until it notices: after about half a minute
# with these, after two hours without. They mean nothing, and do no harm, on a local socket.
_KEEP_ALIVE: Final = (
    "SET tcp_keepalives_idle = 15",
    "SET tcp_keepalives_interval = 5",
    "SET tcp_keepalives_count = 3",
)


class DatabaseExecutorLock:
    """An advisory lock of a session that does nothing else; an ``ExecutorLock``.

    It ends with the session, however the process or the server ends, so that no lock is ever stale.
    A pooler between service and server that hands sessions round would break it: connect directly.
    """

    def __init__(self, database: Database) -> None:
        """Lock ``database``.

        Raises ``EngineLocked`` when another process has the lock, ``StoreUnavailable`` when the
        server cannot be reached.
        """
        self._database = database
        self._connection: Connection | None = None
        self._released = False
        if not self._take():
            raise EngineLocked("the database is locked: another process executes its runs")

    def held(self) -> bool:
        """Say whether the lock is held now, having tried to take it again if it was lost."""
        if self._released:
            return False
        if self._connection is not None:
            try:
                self._connection.execute(text("SELECT 1"))
            except DBAPIError:
                # The server ended the session, and with it the lock.
                self._let_go()
        return self._connection is not None or self._take()

    def release(self) -> None:
        """Let another process take over; may be called twice."""
        self._released = True
        self._let_go()

    def _take(self) -> bool:
        """Take the lock in a session of its own, unless somebody else has it."""
        with reaching():
            connection = self._database.engine.connect()
            try:
                connection.execution_options(isolation_level="AUTOCOMMIT")
                # Out of the pool, whose connections come back: this one must end with the lock.
                connection.detach()
                for statement in _KEEP_ALIVE:
                    connection.execute(text(statement))
                taking = text("SELECT pg_try_advisory_lock(:key)")
                taken = connection.execute(taking, {"key": _EXECUTOR_LOCK}).scalar_one()
            except DBAPIError:
                connection.close()
                raise
        if not taken:
            connection.close()
            return False
        self._connection = connection
        return True

    def _let_go(self) -> None:
        """End the session; that a dead one cannot be ended in order is no news."""
        connection, self._connection = self._connection, None
        if connection is not None:
            with contextlib.suppress(DBAPIError):
                connection.close()
