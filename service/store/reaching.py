"""Saying in the use cases' words that the database cannot be reached, or not in time."""

from collections.abc import Iterator
from contextlib import contextmanager

from sqlalchemy.exc import InterfaceError, OperationalError
from sqlalchemy.exc import TimeoutError as PoolTimeoutError

from service.runs.faults import StoreUnavailable


@contextmanager
def reaching() -> Iterator[None]:
    """Raise ``StoreUnavailable`` where the block cannot reach the database, or loses it."""
    try:
        yield
    except (OperationalError, InterfaceError, PoolTimeoutError) as error:
        raise StoreUnavailable(_first_line(error)) from error


def _first_line(error: Exception) -> str:
    # The rest would be the statement with its values, which belong in no log.
    cause = error.orig if isinstance(error, OperationalError | InterfaceError) else error
    return str(cause).strip().split("\n", maxsplit=1)[0]
