"""The lock that lets one process alone execute the runs of an SQLite file."""

import os
import sys
from pathlib import Path

from service.runs.faults import EngineLocked


class EngineLock:
    """An advisory lock on a file beside the database, held until ``release`` or the process ends.

    An ``ExecutorLock``.

    The kernel lets go of it when the holder dies, however it dies, so that no lock is ever stale;
    the file itself stays, since to remove it would let two processes lock two files of one name.
    """

    def __init__(self, path: Path) -> None:
        """Lock ``path``; raise ``EngineLocked`` when another process has it."""
        path.parent.mkdir(parents=True, exist_ok=True)
        self._descriptor = os.open(path, os.O_RDWR | os.O_CREAT, 0o600)
        try:
            _lock(self._descriptor)
        except OSError as error:
            os.close(self._descriptor)
            raise EngineLocked(f"{path} is locked: another process executes its runs") from error

    def held(self) -> bool:
        """Say whether the file is locked: nobody can take that away."""
        return self._descriptor >= 0

    def release(self) -> None:
        """Let another process take over; may be called twice."""
        # Closed once only: the number may belong to another file by then.
        descriptor, self._descriptor = self._descriptor, -1
        if descriptor >= 0:
            os.close(descriptor)


def _lock(descriptor: int) -> None:
    """Lock the file without waiting; raise ``OSError`` when that cannot be."""
    if sys.platform == "win32":
        import msvcrt  # noqa: PLC0415 - does not exist elsewhere

        msvcrt.locking(descriptor, msvcrt.LK_NBLCK, 1)
    else:
        import fcntl  # noqa: PLC0415 - does not exist on Windows

        fcntl.flock(descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
