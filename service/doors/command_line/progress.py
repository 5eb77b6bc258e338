"""A progress bar on standard error, where a person watches."""

import sys
from collections.abc import Iterator, Mapping
from contextlib import contextmanager

from rich.console import Console
from rich.progress import BarColumn, Progress, TextColumn, TimeElapsedColumn

from service.doors.command_line.backing import OnProgress

# What planning has just done, and what it therefore does now.
_NEXT: Mapping[str, str] = {
    "read": "building the model",
    "compiled": "solving",
    "solved": "writing",
    "written": "proving",
    "proved": "done",
}


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

        def moved(phase: str, _numbers: Mapping[str, int]) -> None:
            if phase in _NEXT:
                done = list(_NEXT).index(phase) + 1
                progress.update(task, completed=done, description=_NEXT[phase])

        yield moved
