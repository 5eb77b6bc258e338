"""The embedded engine: runs are executed by threads of this process, in children of theirs.

The run's row is the only truth. A notification is a wake-up and nothing more: what is to be done is
read from the store, so that a lost or doubled one changes nothing.
"""

import threading
from collections.abc import Callable, Sequence
from typing import Final

import structlog

from service.engine.tasks import PlanningChildren
from service.runs.execute import Execute
from service.runs.lifecycle import FINAL
from service.runs.ports import ExecutorLock
from service.runs.recover import Recover
from service.runs.run import RunId
from service.runs.sweep import Sweep
from service.runs.watch import Watch
from service.telemetry import log_ids

SWEEP_SECONDS: Final = 5.0
# After a mistake of ours or a lost database, so that neither fills the log.
PAUSE_SECONDS: Final = 1.0
STOP_SECONDS_MAX: Final = 15.0

_log = structlog.get_logger(__name__)


class LocalEngine:
    """Executes runs one at a time; a ``Dispatcher``.

    One thread plans, one watches: it renews the lease of what is being planned, ends children whose
    claim is gone, and settles what is overdue also while the other is busy.
    """

    def __init__(  # noqa: PLR0913 - four use cases and what they need, all named
        self,
        *,
        execute: Execute,
        sweep: Sweep,
        watch: Watch,
        recover: Recover,
        planner: PlanningChildren,
        poll_seconds: float,
    ) -> None:
        """Take the use cases; nothing runs before ``start``."""
        self._execute = execute
        self._sweep = sweep
        self._watch = watch
        self._recover = recover
        self._planner = planner
        self._poll_seconds = poll_seconds
        self._wake = threading.Event()
        self._stopping = threading.Event()
        self._lock: ExecutorLock | None = None
        # Whether runs may be claimed: nobody else executes them, as far as can be known.
        self._alone = True
        self._threads = [
            threading.Thread(target=self._supervise, args=args, name=name, daemon=True)
            for name, args in (
                ("engine-slot", (self._plan_waiting, self._wake, SWEEP_SECONDS)),
                ("engine-watch", (self._look_after, self._stopping, poll_seconds)),
            )
        ]
        self._sweep_in = 0.0

    def start(self, lock: ExecutorLock) -> None:
        """Begin to execute runs.

        ``lock`` proves that no other process does so on this database; what a former process was
        working on is therefore taken over at once, without waiting for its leases.
        """
        self._lock = lock
        recovered = self._recover()
        _log.info("engine_started", recovered=recovered)
        for thread in self._threads:
            thread.start()

    def notify(self, run_id: RunId) -> None:
        """Say that ``run_id`` waits."""
        _log.debug("run_waits", run_id=run_id)
        self._wake.set()

    def stop(self) -> None:
        """End what is under way, uncounted, and let go of the database; may be called twice.

        The run that was being planned waits again, and whoever starts next takes it.
        """
        self._stopping.set()
        self._planner.close()
        self._wake.set()
        for thread in self._threads:
            if thread.is_alive():
                thread.join(STOP_SECONDS_MAX)
        if self._lock is not None:
            self._lock.release()
            self._lock = None

    def working(self) -> bool:
        """Say whether runs are executed: both threads live and the lock is held."""
        return self._alone and all(thread.is_alive() for thread in self._threads)

    def _supervise(self, work: Callable[[], None], wake: threading.Event, seconds: float) -> None:
        """Do ``work`` whenever woken and every few ``seconds``, whatever happens in it."""
        while not self._stopping.is_set():
            try:
                work()
            except Exception:  # noqa: BLE001 - the one place: a slot must outlive every mistake
                _log.exception("engine_failed", thread=threading.current_thread().name)
                self._stopping.wait(PAUSE_SECONDS)
            wake.wait(seconds)

    def _plan_waiting(self) -> None:
        """Plan what waits, oldest first, until nothing does."""
        while self._alone and not self._stopping.is_set():
            # Before the look: what is added after it sets the event again.
            self._wake.clear()
            waiting: Sequence[RunId] = self._sweep()
            if not waiting:
                return
            for run_id in waiting:
                if self._stopping.is_set() or not self._alone:
                    return
                self._plan_one(run_id)

    def _plan_one(self, run_id: RunId) -> None:
        with log_ids(run_id=run_id):
            try:
                state = self._execute(run_id)
            finally:
                self._planner.settled()
            _log.info("run_executed", state=state)
        if state not in FINAL:
            # Given back, or not to be had: whatever the cause, it may need a moment to pass.
            self._stopping.wait(self._poll_seconds)

    def _look_after(self) -> None:
        """Renew leases, end children whose claim is gone, and now and then sweep."""
        tokens = self._planner.tokens()
        told = ((token, self._planner.progress(token)) for token in tokens)
        progress = {token: progress for token, progress in told if progress is not None}
        self._planner.release(self._watch(tokens, progress))
        self._sweep_in -= self._poll_seconds
        if self._sweep_in <= 0:
            self._sweep_in = SWEEP_SECONDS
            self._look_at_lock()
            if self._sweep():
                self._wake.set()

    def _look_at_lock(self) -> None:
        """Claim nothing while another process has the lock; what is under way is fenced anyway."""
        alone = self._lock is not None and self._lock.held()
        if alone != self._alone:
            self._alone = alone
            _log.warning("engine_lock_is_back" if alone else "engine_lock_lost")
