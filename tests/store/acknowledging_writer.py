"""A writer for the test of durability: submits runs for ever, and says each that was acknowledged.

Started as a process of its own, so that it can be killed in the middle of anything.
"""

import itertools
import sys
from pathlib import Path

from service.store.database import open_database
from service.store.sql_store import SqlStore, SystemClock
from tests.run_factories import submitted


def main(url: str, folder: str) -> None:
    """Submit until killed; one line on standard output for each run that was acknowledged."""
    store = SqlStore(open_database(url), SystemClock())
    for turn in itertools.count():
        run = submitted(store, Path(folder) / str(turn % 5), deadline_seconds=900)
        sys.stdout.write(f"{run.id} {run.number}\n")
        sys.stdout.flush()


if __name__ == "__main__":
    main(*sys.argv[1:])
