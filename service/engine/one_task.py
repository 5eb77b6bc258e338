"""One child for one task: what a command needs that works without a server.

Everything is as in the service (its own process, limits, a framed answer), only nothing is kept
warm. Whatever ends the caller, Ctrl-C included, ends the child.
"""

import threading
from collections.abc import Mapping, Sequence

from service.engine.children import CHILD_COMMAND
from service.engine.process import Child, OnProgress


def do_one_task(  # noqa: PLR0913 - the kind, the task and each limit by name
    kind: str,
    task: Mapping[str, object],
    *,
    seconds: float,
    memory_bytes: int,
    on_progress: OnProgress | None = None,
    command: Sequence[str] = CHILD_COMMAND,
) -> Mapping[str, object]:
    """Start a child of ``kind``, have ``task`` done, end the child, return its answer.

    To be called from the main thread: Linux ends a child with the thread that started it. Raises
    what ``Child.ask`` raises.
    """
    child = Child(command, kind)
    try:
        return child.ask(
            task,
            seconds=seconds,
            memory_bytes=memory_bytes,
            released=threading.Event(),
            on_progress=on_progress,
        )
    finally:
        child.end()
