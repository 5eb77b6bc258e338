"""Interrupting a command: nothing of it stays behind."""

import os
import signal
import subprocess
import time
from collections.abc import Iterator
from pathlib import Path

import pytest

from tests.doors.command_line.test_whole import PROGRAM, SECONDS_MAX, environment


@pytest.fixture
def _ctrl_c_reaches_programs() -> Iterator[None]:
    """Let programs be interrupted also where these tests run behind somebody's ``&``.

    There the shell has SIGINT ignored, and programs inherit what is ignored but not a handler.
    """
    former = signal.signal(signal.SIGINT, signal.default_int_handler)
    yield
    signal.signal(signal.SIGINT, former)


@pytest.mark.usefixtures("_ctrl_c_reaches_programs")
def test_ctrl_c_ends_the_child_too(tmp_path: Path) -> None:
    """A planner who gives up must not leave a process behind that eats the machine."""
    with (tmp_path / "network.json").open("wb") as body:
        # Blanks say nothing for long enough: the child has the file open while it reads them.
        for _ in range(256):
            body.write(b" " * (1 << 20))
    with subprocess.Popen(
        [PROGRAM, "check", "network.json"],
        cwd=tmp_path,
        env=environment(tmp_path),
        stderr=subprocess.PIPE,
        start_new_session=True,
    ) as process:
        try:
            child = wait_for_reader(process.pid, tmp_path / "network.json")
            os.kill(process.pid, signal.SIGINT)
            code = process.wait(timeout=SECONDS_MAX)
        finally:
            process.kill()

    assert code == 130
    assert ended(child)


def wait_for_reader(parent: int, file: Path) -> int:
    """Return the process id of the child of ``parent`` that has soon opened ``file``."""
    until = time.monotonic() + SECONDS_MAX
    while time.monotonic() < until:
        children = Path(f"/proc/{parent}/task/{parent}/children").read_text(encoding="ascii")
        for child in map(int, children.split()):
            opened = Path(f"/proc/{child}/fd").iterdir()
            if any(link.is_symlink() and link.resolve() == file for link in opened):
                return child
        time.sleep(0.02)
    raise AssertionError("no child began to read")


def ended(process: int) -> bool:
    """Say whether a process is soon gone, or dead and only waits for process 1 to look."""
    until = time.monotonic() + SECONDS_MAX
    while time.monotonic() < until:
        try:
            status = Path(f"/proc/{process}/stat").read_text(encoding="utf-8")
        except (FileNotFoundError, ProcessLookupError):
            return True
        # The name stands in brackets and may hold anything; the state comes after it.
        if status.rpartition(")")[2].split()[0] in "ZX":
            return True
        time.sleep(0.02)
    return False
