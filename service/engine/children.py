"""Supervised child processes, started ahead of time and lent out.

Linux ties "kill me when my parent dies" to the *thread* that started the child. All children are
therefore started by one thread that lives as long as the process (``Nursery``); whoever uses them
may come and go.
"""

import queue
import subprocess
import sys
import threading
from collections.abc import Sequence
from concurrent.futures import Future

import structlog

from service.engine.process import Child
from service.runs.faults import ChildReleased

CHILD_COMMAND: tuple[str, ...] = (sys.executable, "-m", "service.engine.child")

_log = structlog.get_logger(__name__)


class Nursery:
    """Starts children of one kind ahead of time and lends them out.

    ``spares`` children are always warm beside those lent, so that a task never waits for imports,
    not even after a crash.
    """

    def __init__(
        self, kind: str, *, command: Sequence[str] = CHILD_COMMAND, spares: int = 1
    ) -> None:
        """Start the thread that starts the children; the first spare is on its way at once."""
        self._kind = kind
        self._command = tuple(command)
        self._spares = spares
        self._lock = threading.Lock()
        self._idle: list[Child] = []
        self._closed = False
        self._orders: queue.SimpleQueue[Future[Child] | None] = queue.SimpleQueue()
        # A daemon: it must not keep a finished process alive, and ends only with it.
        self._thread = threading.Thread(target=self._work, name=f"nursery-{kind}", daemon=True)
        self._thread.start()
        self._order_spares()

    def take(self) -> Child:
        """Lend a child to the caller, warm if one is.

        Raises ``ChildReleased`` after ``close``, ``OSError`` when the system starts no process.
        """
        with self._lock:
            if self._closed:
                raise ChildReleased("the service is stopping")
            child = None
            while self._idle and child is None:
                candidate = self._idle.pop()
                # One that died while it was idle must not be held against the next run.
                if candidate.alive():
                    child = candidate
                else:
                    candidate.end()
        if child is None:
            order: Future[Child] = Future()
            self._orders.put(order)
            child = order.result()
        self._order_spares()
        return child

    def give_back(self, child: Child, *, input_bytes: int) -> None:
        """Take a child back after a task that was answered."""
        with self._lock:
            keep = not self._closed and child.alive() and not child.worn(input_bytes)
            if keep:
                self._idle.append(child)
        if not keep:
            child.end()
            self._order_spares()

    def close(self) -> None:
        """End every idle child and lend no more; lent ones are ended by their users."""
        with self._lock:
            self._closed = True
            idle, self._idle = self._idle, []
        for child in idle:
            child.end()

    def pids(self) -> tuple[int, ...]:
        """Return the process ids of the idle children."""
        with self._lock:
            return tuple(child.pid for child in self._idle)

    def _order_spares(self) -> None:
        """Ask for spares without waiting for them."""
        self._orders.put(None)

    def _work(self) -> None:
        """Start children as ordered, for as long as the process lives."""
        while True:
            order = self._orders.get()
            if order is not None:
                try:
                    order.set_result(Child(self._command, self._kind))
                except (OSError, subprocess.SubprocessError) as error:
                    order.set_exception(error)
            elif self._wants_spare():
                try:
                    spare = Child(self._command, self._kind)
                except (OSError, subprocess.SubprocessError) as error:
                    _log.warning("spare_child_not_started", kind=self._kind, error=str(error))
                else:
                    self._keep_spare(spare)

    def _wants_spare(self) -> bool:
        with self._lock:
            return not self._closed and len(self._idle) < self._spares

    def _keep_spare(self, spare: Child) -> None:
        """Keep the new spare, unless the nursery was closed while it started."""
        with self._lock:
            closed = self._closed
            if not closed:
                self._idle.insert(0, spare)
        if closed:
            spare.end()
