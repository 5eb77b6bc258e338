"""The seams of the house: what the use cases need from outside.

The other side of each seam lives elsewhere: ``Store`` in ``service/store``, ``Planner``,
``Dispatcher`` and ``ExecutorLock`` there and in ``service/engine``. Tests put fakes in their place.
What travels over the seams is in ``runs/run.py`` and ``runs/faults.py``; what doors receive in
``runs/use_cases.py``.
"""

from collections.abc import Collection, Mapping, Sequence
from contextlib import AbstractContextManager
from datetime import date, datetime
from pathlib import Path
from typing import TYPE_CHECKING, Protocol

from service.runs.run import (
    Actor,
    Claim,
    Ending,
    Finish,
    IndexRows,
    Needs,
    Progress,
    Run,
    RunId,
    Staged,
    StoredEvent,
    Submission,
    Token,
)

if TYPE_CHECKING:
    from service.network.options import Options
    from service.planning.outcome import Outcome


class Clock(Protocol):
    """Where the time comes from, so that tests can set it."""

    def now(self) -> datetime:
        """Return the present moment in UTC."""
        ...


class Dispatcher(Protocol):
    """Wakes whoever executes runs."""

    def notify(self, run_id: RunId) -> None:
        """Say that ``run_id`` waits; losing or doubling the message changes no result."""
        ...


class ExecutorLock(Protocol):
    """Proves that no other process executes the runs of this database."""

    def held(self) -> bool:
        """Say whether it is held now, having tried to take it again if it was lost.

        Raises ``StoreUnavailable`` when that cannot be known.
        """
        ...

    def release(self) -> None:
        """Let another process take over; may be called twice."""
        ...


class Planner(Protocol):
    """Runs ``planning/task.py`` in a supervised child."""

    def plan(self, claim: Claim, source: Path, options: "Options", target: Path) -> "Outcome":
        """Plan the network in folder ``source``; leave the artefacts in folder ``target``.

        Raises
        ------
        ChildTimeout
            When ``claim.seconds_left`` are over; the child is dead by then.
        ChildMemory, ChildCrashed, ChildReleased
            As named.
        """
        ...

    def progress(self, token: Token) -> Progress | None:
        """Return what planning under ``token`` told last, None if nothing yet."""
        ...


class Transaction(Protocol):
    """One unit of work: all of it is on disk when the block ends, or none of it."""

    @property
    def now(self) -> datetime:
        """The moment of this transaction: the database's on PostgreSQL, else the clock's."""
        ...

    def next_number(self, tenant: str, plan_for: date) -> int:
        """Draw the next run number of ``plan_for``, gapless: a rolled-back one is drawn again."""
        ...

    def add_blob(self, staged: Staged) -> None:
        """Write what is not yet written of ``staged``."""
        ...

    def add_run(self, submission: Submission, needs: Needs) -> None:
        """Insert a waiting run."""
        ...

    def run(self, run_id: RunId, tenant: str) -> Run:
        """Return the run, or raise ``RunUnknown``."""
        ...

    def submission(self, run_id: RunId, tenant: str) -> Submission:
        """Return what was submitted, or raise ``RunUnknown``."""
        ...

    def claim(
        self, run_id: RunId, *, token: Token, lease_seconds: float, crashes_max: int
    ) -> Claim | None:
        """Take the run for ``token`` if it waits, or if its holder's lease is over.

        A lease that ran out counts as a crash; where that would be crash ``crashes_max``, the run
        is left for the sweep to end.
        """
        ...

    def finish(
        self,
        claim: Claim,
        ending: Ending,
        *,
        crashed: bool = False,
        progress: Progress | None = None,
    ) -> Finish:
        """Make the run final, if ``claim`` still holds it; count a crash if it ends by one.

        ``progress`` None leaves what was told last.
        """
        ...

    def give_back(self, claim: Claim, *, crashed: bool) -> int | None:
        """Let the run wait again; return its crashes by now, or None when the claim is gone."""
        ...

    def fail_waiting(self, run_id: RunId, tenant: str, ending: Ending) -> bool:
        """Make a waiting run final without planning it; False when it no longer waits."""
        ...

    def renew(
        self,
        tokens: Collection[Token],
        *,
        lease_seconds: float,
        progress: Mapping[Token, Progress],
    ) -> frozenset[Token]:
        """Renew the leases of ``tokens`` and note how far they are, where that is known.

        Returns those that still hold a run.
        """
        ...

    def waiting(self, *, limit: int) -> Sequence[RunId]:
        """Return runs that wait and whose deadline is ahead, oldest first."""
        ...

    def overdue(self, *, limit: int) -> Sequence[tuple[RunId, str]]:
        """Return (run, tenant) of runs that wait although their deadline has passed."""
        ...

    def held(self, *, expired_only: bool, limit: int) -> Sequence[Claim]:
        """Return the claims of running runs, oldest first; or only those whose lease is over."""
        ...

    def add_index_rows(self, run_id: RunId, tenant: str, rows: IndexRows) -> None:
        """Insert the search rows of a plan."""
        ...

    def append(
        self, stream: str, kind: str, actor: Actor, payload: Mapping[str, object] | None
    ) -> StoredEvent:
        """Append an event to ``stream`` of the actor's tenant, chained to the one before."""
        ...

    def events(self, stream: str, tenant: str) -> Sequence[StoredEvent]:
        """Return all events of a stream in order."""
        ...


class Store(Protocol):
    """Where everything is kept."""

    def transaction(self) -> AbstractContextManager[Transaction]:
        """Begin a unit of work that may write."""
        ...

    def reading(self) -> AbstractContextManager[Transaction]:
        """Begin a unit of work that only reads, one moment of the store throughout."""
        ...

    def stage_file(self, tenant: str, path: Path) -> Staged:
        """Take a file in as a blob, outside of any transaction."""
        ...

    def stage_bytes(self, tenant: str, content: bytes) -> Staged:
        """Take bytes in as a blob, outside of any transaction."""
        ...

    def blob(self, tenant: str, digest: str) -> bytes:
        """Return the whole blob, checked against its digest."""
        ...

    def blob_to_file(self, tenant: str, digest: str, path: Path) -> None:
        """Write the blob to ``path`` part by part, checked against its digest."""
        ...

    def warm_start(self, tenant: str, *, network_digest: str, likeness: str | None) -> bytes | None:
        """Return what the newest planned run of this network left for the next to start from.

        Else that of the newest run of equal ``likeness``. None when there is none, and when it
        cannot be had for whatever reason: it is a cache, and a run starts cold without.
        """
        ...

    def keep_warm_start(self, run_id: RunId, tenant: str, content: bytes) -> None:
        """Keep what a planned run found out, if it can be kept; never raises for a cache's sake."""
        ...

    def missing(self) -> list[str]:
        """Return what keeps the store from working, in words; empty means ready."""
        ...
