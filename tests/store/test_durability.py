"""What was acknowledged is on disk, whoever is killed in the middle of whatever."""

import subprocess
import sys
import time
from collections.abc import Iterator
from pathlib import Path

import pytest

from service.runs.run import RunId
from service.store.audit import check_store
from service.store.migrate import migrate
from service.store.sql_store import SqlStore, SystemClock
from tests.databases import Opened, new_postgres_database
from tests.servers import PostgresServer, postgres

ROOT = Path(__file__).parents[2]
WRITER = "tests.store.acknowledging_writer"


def written_until_killed(url: str, folder: Path, *, seconds: float) -> list[tuple[str, str]]:
    """Start a writer, kill it in the middle of its work; return what it had acknowledged."""
    output = folder / "acknowledged"
    with output.open("ab") as acknowledged:
        writer = subprocess.Popen(
            [sys.executable, "-m", WRITER, url, str(folder)],
            cwd=ROOT,
            stdout=acknowledged,
        )
    try:
        begin = output.stat().st_size
        until = time.monotonic() + 60
        while output.stat().st_size == begin:
            assert writer.poll() is None, "the writer ended by itself"
            assert time.monotonic() < until, "the writer acknowledged nothing"
            time.sleep(0.01)
        time.sleep(seconds)
    finally:
        writer.kill()
        writer.wait()
    # The last line may be cut off: then nobody was told.
    lines = output.read_text().split("\n")[:-1]
    return [(run, number) for run, number in (line.split(" ") for line in lines)]


def test_killed_writer_loses_nothing_that_it_acknowledged(
    database_url: str,
    tmp_path: Path,
    opened: Opened,
    request: pytest.FixtureRequest,
) -> None:
    """Kill -9 in the middle of commits, over and over; the next writer goes on from there."""
    rounds = 12 if request.config.getoption("--long") else 2

    acknowledged: list[tuple[str, str]] = []
    for turn in range(rounds):
        acknowledged = written_until_killed(database_url, tmp_path, seconds=0.2 + 0.13 * turn)

    database = opened(database_url)
    store = SqlStore(database, SystemClock())
    with store.reading() as reading:
        found = [(run, reading.run(RunId(run), "local").number) for run, _ in acknowledged]
    assert len(acknowledged) >= rounds
    assert found == acknowledged
    assert check_store(database).problems == ()


@pytest.fixture
def durable_server() -> Iterator[PostgresServer]:
    """Run a PostgreSQL that forces commits to disk, to be killed by the test."""
    with postgres(durable=True) as server:
        yield server


def test_killed_database_loses_nothing_that_was_acknowledged(
    durable_server: PostgresServer,
    tmp_path: Path,
    opened: Opened,
) -> None:
    """The server itself is killed, all of it at once, and comes back from its log."""
    url = new_postgres_database(durable_server, "durable")
    migrate(url)

    acknowledged = written_until_killed(url, tmp_path, seconds=0.3)
    with durable_server.killed_and_restarted() as restarted:
        database = opened(restarted.url("durable"))
        store = SqlStore(database, SystemClock())
        with store.reading() as reading:
            found = [(run, reading.run(RunId(run), "local").number) for run, _ in acknowledged]
        problems = check_store(database).problems
        database.close()

    assert acknowledged
    assert found == acknowledged
    assert problems == ()
