"""How the tests of this folder run a command."""

from pathlib import Path

import pytest

from service.doors.command_line.commands import run_command
from tests.doors.command_line.work import FakeWork, Run


@pytest.fixture
def run(capfdbinary: pytest.CaptureFixture[bytes]) -> Run:
    """Return how to run a command: arguments and work in, exit code and both streams out."""

    def run_it(*arguments: object, work: FakeWork | None = None) -> tuple[int, str, str]:
        code = run_command([str(a) for a in arguments], (work or FakeWork()).backing())
        out, err = capfdbinary.readouterr()
        return code, out.decode(), err.decode()

    return run_it


@pytest.fixture
def network(tmp_path: Path) -> Path:
    """Return a file to be planned; the fake does not read it."""
    path = tmp_path / "network.json"
    path.write_bytes(b"{}")
    return path
