"""How the tests of the engine start children that misbehave, and tell whether they are gone."""

import sys
import threading
import time
from collections.abc import Mapping
from pathlib import Path

from service.engine.process import Child

COMMAND = (sys.executable, str(Path(__file__).with_name("faulty_child.py")))
GIBIBYTE = 2**30


def ask(
    child: Child,
    do: str,
    *,
    seconds: float = 20,
    memory_bytes: int = GIBIBYTE,
    released: threading.Event | None = None,
    **task: object,
) -> Mapping[str, object]:
    """Have ``child`` do what ``do`` and ``task`` say."""
    return child.ask(
        {"do": do, **task},
        seconds=seconds,
        memory_bytes=memory_bytes,
        released=released or threading.Event(),
    )


def running(pid: int) -> bool:
    """Say whether a process exists and is more than a zombie that nobody has reaped yet."""
    try:
        fields = Path(f"/proc/{pid}/stat").read_text(encoding="ascii").rpartition(")")[2].split()
    except FileNotFoundError:
        return False
    return fields[0] != "Z"


def children_of(parent: int) -> dict[int, list[str]]:
    """Return the processes that ``parent`` started, each with the words of its command."""
    found = {}
    for entry in Path("/proc").iterdir():
        if entry.name.isdigit():
            try:
                stat = (entry / "stat").read_text(encoding="ascii")
                words = (entry / "cmdline").read_bytes().decode().split("\0")
            except OSError:
                continue  # it ended while it was looked at
            if int(stat.rpartition(")")[2].split()[1]) == parent:
                found[int(entry.name)] = words
    return found


def await_end(pid: int, seconds: float = 5) -> bool:
    """Wait until ``pid`` no longer runs."""
    until = time.monotonic() + seconds
    while running(pid) and time.monotonic() < until:
        time.sleep(0.02)
    return not running(pid)
