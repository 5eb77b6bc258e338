"""A progress bar on standard error, where a person watches."""

import sys
from collections.abc import Iterator, Mapping
from contextlib import contextmanager

from rich.console import Console
from rich.progress import BarColumn, Progress, TextColumn, TimeElapsedColumn

from service.doors.command_line.backing import OnProgress
from service.doors.command_line.layout import count_of, grouped

# What planning has just done, and what it therefore does now.
_NEXT: Mapping[str, str] = {
    "checked": "reading",
    "read": "building the model",
    "compiled": "solving",
    "solved": "writing",
    "written": "proving",
    "proved": "done",
}
_ROUND = "round"


@contextmanager
def progress_bar(first: str) -> Iterator[OnProgress]:
    """Show a bar while the block lasts, if standard error is a terminal; yield how to move it."""
    if not sys.stderr.isatty():
        yield lambda _phase, _numbers: None
        return
    columns = (TextColumn("{task.description}"), BarColumn(), TimeElapsedColumn())
    console = Console(stderr=True)
    with Progress(*columns, console=console, transient=True) as progress:
        task = progress.add_task(first, total=len(_NEXT))

        def moved(phase: str, numbers: Mapping[str, int]) -> None:
            if phase in _NEXT:
                done = list(_NEXT).index(phase) + 1
                progress.update(task, completed=done, description=doing(phase, numbers))
            elif phase == _ROUND:
                # How many rounds there will be is not known: the bar waits, the words move.
                progress.update(task, description=doing(phase, numbers))

        yield moved


def doing(phase: str, numbers: Mapping[str, int]) -> str:
    """Return in words what is done now that ``phase`` was told with its ``numbers``."""
    if phase != _ROUND:
        lanes = numbers.get("lanes")
        return _NEXT[phase] + (f" of {count_of(lanes, 'lane')}" if lanes else "")
    words = f"solving: round {numbers.get('round', 1)}"
    priced = numbers.get("priced")
    return words + (f", {grouped(priced)} lanes priced" if priced else "")
