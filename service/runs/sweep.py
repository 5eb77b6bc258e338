"""Sweeping: runs that wait beyond their deadline fail; runs whose holder is silent wait again."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

from service.planning.outcome import FailureReason
from service.runs.events import run_stream
from service.runs.lifecycle import CRASHES_MAX
from service.runs.ports import Store
from service.runs.records import EventKind, GivenBack, finished_payload
from service.runs.run import RunId, engine_of
from service.runs.settle import failure, settle_crash

_AT_ONCE: Final = 100


@dataclass(frozen=True, slots=True, kw_only=True)
class Sweep:
    """Brings every accepted run to an end; to be called every few seconds."""

    store: Store
    crashes_max: int = CRASHES_MAX

    def __call__(self) -> Sequence[RunId]:
        """Settle what is overdue, then return runs that wait to be planned, oldest first."""
        self._expire()
        self._take_back()
        with self.store.reading() as reading:
            return reading.waiting(limit=_AT_ONCE)

    def _expire(self) -> None:
        """Fail what waited too long, one transaction a run, so that none is long."""
        with self.store.reading() as reading:
            overdue = reading.overdue(limit=_AT_ONCE)
        for run_id, tenant in overdue:
            with self.store.transaction() as transaction:
                run = transaction.run(run_id, tenant)
                ending = failure(
                    FailureReason.DEADLINE,
                    "The deadline passed while the run waited for its turn.",
                    attempt=run.attempt,
                    started_at=run.started_at,
                    finished_at=transaction.now,
                )
                if transaction.fail_waiting(run_id, tenant, ending):
                    transaction.append(
                        run_stream(run_id),
                        EventKind.FINISHED,
                        engine_of(tenant),
                        finished_payload(ending, crashes=run.crashes),
                    )

    def _take_back(self) -> None:
        """Let runs wait again whose leases are over; with the last crash they fail."""
        with self.store.transaction() as transaction:
            for claim in transaction.held(expired_only=True, limit=_AT_ONCE):
                settle_crash(
                    transaction,
                    claim,
                    GivenBack.LEASE,
                    detail="its holder went silent.",
                    crashes_max=self.crashes_max,
                )
