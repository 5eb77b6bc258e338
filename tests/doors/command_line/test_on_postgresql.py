"""The same program on PostgreSQL, by one setting and nothing else."""

import os
import signal
import subprocess
import sys
from pathlib import Path

from service.store.migrate import migrate
from tests.databases import new_postgres_database, plain
from tests.servers import PostgresServer

PROGRAM = Path(sys.executable).with_name("lanewright")


def test_one_setting_moves_everything_to_postgresql(
    postgres_server: PostgresServer, tmp_path: Path
) -> None:
    """Refused before the migration, then migrated once, planned, stored, and sound."""
    url = plain(new_postgres_database(postgres_server, "lanewright_whole"))

    def lanewright(*arguments: str) -> subprocess.CompletedProcess[str]:
        return subprocess.run(
            [PROGRAM, *arguments],
            cwd=tmp_path,
            env={"PATH": os.environ["PATH"], "LANEWRIGHT_DATABASE": url},
            capture_output=True,
            text=True,
            timeout=120,
            check=False,
        )

    early = lanewright("demo")
    assert early.returncode == 1
    assert early.stderr.startswith("lanewright: migrations 0001")
    assert early.stderr.endswith(": run lanewright migrate\n")
    assert lanewright("migrate").stdout.startswith("Applied 0001")
    assert lanewright("migrate").stdout == "The database is up to date.\n"

    demo = lanewright("demo")

    assert demo.returncode == 0, demo.stderr
    assert "run 2026-02-03/1" in demo.stdout
    assert lanewright("audit", "check").stdout == "intact\n"
    assert not list(tmp_path.rglob("*.db"))


def test_second_service_on_one_database_refuses_to_start(
    postgres_server: PostgresServer, tmp_path: Path
) -> None:
    """Both would execute the same runs; the second says so, and the first is left alone."""
    url = new_postgres_database(postgres_server, "lanewright_twice")
    migrate(url)
    environment = {
        "PATH": os.environ["PATH"],
        "LANEWRIGHT_DATABASE": plain(url),
        "LANEWRIGHT_LOG_LEVEL": "error",
    }
    command: list[str | Path] = [PROGRAM, "serve", "--port", "0"]
    with subprocess.Popen(
        command, cwd=tmp_path, env=environment, stderr=subprocess.PIPE, text=True
    ) as first:
        assert first.stderr is not None
        assert "serving at" in first.stderr.readline()

        second = subprocess.run(
            command,
            cwd=tmp_path,
            env=environment,
            capture_output=True,
            text=True,
            timeout=60,
            check=False,
        )

        alive = first.poll() is None
        first.send_signal(signal.SIGTERM)
        first.communicate(timeout=60)
    assert second.returncode == 1
    assert second.stderr == (
        "lanewright: the database is locked: another process executes its runs. Stop it, or set "
        "LANEWRIGHT_DATABASE to another database.\n"
    )
    assert alive


def test_a_server_that_is_away_is_said_in_a_sentence(tmp_path: Path) -> None:
    """An operator reads the first line; a traceback has its cause in the last."""
    for command in ("migrate", "demo"):
        result = subprocess.run(
            [PROGRAM, command],
            cwd=tmp_path,
            # Port 9 (discard, RFC 863) is one that nobody listens on today.
            env={
                "PATH": os.environ["PATH"],
                "LANEWRIGHT_DATABASE": "postgresql://salt@127.0.0.1:9/x",
            },
            capture_output=True,
            text=True,
            timeout=120,
            check=False,
        )

        assert result.returncode == 1, command
        assert result.stderr.startswith("lanewright: "), result.stderr
        assert "Traceback" not in result.stderr
