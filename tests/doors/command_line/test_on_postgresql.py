"""The same program on PostgreSQL, by one setting and nothing else."""

import os
import subprocess
import sys
from pathlib import Path

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
