"""Migrations: bringing a database to the form that this release works with.

A migration works while the previous release still runs, so a database that is ahead of this release
is no fault.
"""

import functools
from pathlib import Path
from typing import Final

from alembic import command
from alembic.config import Config
from alembic.runtime.migration import MigrationContext
from alembic.script import ScriptDirectory
from sqlalchemy import Connection, text

from service.store.database import Database, open_database
from service.store.reaching import reaching
from service.store.triggers import trigger_faults

_HERE: Final = Path(__file__).parent
# Any number serves, as long as nobody else in this database takes it.
_MIGRATION_LOCK: Final = 5_072_615_443_021_877


class MigrationBroken(Exception):  # noqa: N818 - named for the fact, like every error here
    """The database is not what the migrations should have made of it."""


def migrations_folder() -> Path:
    """Return the folder of migrations: packed beside this file, or at the top of a checkout."""
    packed = _HERE / "migrations"
    return packed if packed.is_dir() else _HERE.parent.parent / "migrations"


def migrate(url: str) -> list[str]:
    """Bring the database at ``url`` up to date; return the revisions that were applied.

    All of them in one transaction, alone: a second process that migrates waits, then finds nothing
    left to do. Afterwards the triggers are compared.
    """
    database = open_database(url)
    try:
        return migrate_database(database)
    finally:
        database.close()


def migrate_database(database: Database, *, revision: str = "head") -> list[str]:
    """Bring an open database to ``revision``; return what was applied.

    Raises ``StoreUnavailable`` when the database cannot be reached, ``MigrationBroken`` when it is
    not what the migrations should have made of it.
    """
    with reaching(), database.writing, database.engine.begin() as connection:
        if not database.is_sqlite:
            connection.execute(text("SELECT pg_advisory_xact_lock(:key)"), {"key": _MIGRATION_LOCK})
        waiting = pending_in(connection)
        command.upgrade(_config(connection), revision)
        faults = trigger_faults(connection) if revision == "head" else []
        if faults:
            raise MigrationBroken("; ".join(faults))
        return waiting


def downgrade_database(database: Database, *, revision: str = "base") -> None:
    """Take migrations back, facts and all; for tests of the migrations."""
    with database.writing, database.engine.begin() as connection:
        command.downgrade(_config(connection), revision)


def pending_in(connection: Connection) -> list[str]:
    """Return the revisions that an open database still lacks, oldest first.

    Empty when it is up to date, or ahead of this release.
    """
    known = _revisions(migrations_folder())
    heads = MigrationContext.configure(connection).get_current_heads()
    if any(head not in known for head in heads):
        return []
    applied = max((known.index(head) + 1 for head in heads), default=0)
    return list(known[applied:])


@functools.cache
def _revisions(folder: Path) -> tuple[str, ...]:
    """Return all revisions, oldest first; read once, since readiness is asked for often.

    There is one line of them: a second head would make Alembic itself fail.
    """
    scripts = ScriptDirectory(str(folder))
    return tuple(reversed([script.revision for script in scripts.walk_revisions()]))


def _config(connection: Connection) -> Config:
    config = Config()
    config.set_main_option("script_location", str(migrations_folder()).replace("%", "%%"))
    # The revisions are found by path, wherever the folder lies; there is only this one place.
    config.set_main_option("path_separator", "os")
    config.attributes["connection"] = connection
    return config
