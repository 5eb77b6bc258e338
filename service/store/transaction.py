"""One unit of work over all repositories: what the use cases see of the database."""

import hashlib
from collections.abc import Collection, Mapping, Sequence
from datetime import UTC, date, datetime

from sqlalchemy import DateTime, func, select
from sqlalchemy.orm import Session

from service.runs.lifecycle import FINAL
from service.runs.ports import Clock
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
from service.store.blob_repository import SqlBlobRepository
from service.store.dispatch_repository import SqlDispatchRepository
from service.store.event_repository import SqlEventRepository
from service.store.index_repository import SqlIndexRepository
from service.store.run_repository import SqlRunRepository

_DATABASE_NOW = func.clock_timestamp(type_=DateTime(timezone=True))


class SqlTransaction:
    """The port ``Transaction`` over one database session."""

    def __init__(self, session: Session, clock: Clock) -> None:
        """Work in ``session``, which the caller commits; ``clock`` gives the time on SQLite."""
        self._session = session
        self._clock = clock
        self._now: datetime | None = None
        self._runs = SqlRunRepository(session)
        self._dispatch = SqlDispatchRepository(session)
        self._events = SqlEventRepository(session)
        self._blobs = SqlBlobRepository(session)
        self._index = SqlIndexRepository(session)

    @property
    def now(self) -> datetime:
        """The moment of this transaction, read once.

        On PostgreSQL the database's own: several machines share it, and leases must not depend on
        how their clocks differ.
        """
        if self._now is None:
            if self._on_postgresql:
                moment = self._session.execute(select(_DATABASE_NOW)).scalar_one()
                self._now = moment.astimezone(UTC)
            else:
                self._now = self._clock.now().astimezone(UTC)
        return self._now

    def next_number(self, tenant: str, plan_for: date) -> int:
        """Draw the next number of a date: gapless, since it is only one more than the highest."""
        self._one_at_a_time("number", tenant, plan_for.isoformat())
        return self._runs.highest_number(tenant, plan_for) + 1

    def add_blob(self, staged: Staged) -> None:
        """Write a small blob; a large one was written when it was staged."""
        if staged.part is not None:
            self._blobs.add(
                staged.tenant,
                staged.digest,
                part=0,
                parts=1,
                unpacked_bytes=staged.unpacked_bytes,
                packed=staged.part,
            )

    def add_run(self, submission: Submission, needs: Needs) -> None:
        """Insert a waiting run."""
        self._runs.add(submission, needs)

    def run(self, run_id: RunId, tenant: str) -> Run:
        """Return the run as it stands."""
        return self._runs.get(run_id, tenant)

    def submission(self, run_id: RunId, tenant: str) -> Submission:
        """Return what was submitted."""
        return self._runs.submission(run_id, tenant)

    def claim(
        self,
        run_id: RunId,
        *,
        token: Token,
        lease_seconds: float,
        crashes_max: int,
    ) -> Claim | None:
        """Take the run for ``token``, if it is to be had."""
        return self._dispatch.claim(
            run_id,
            token=token,
            now=self.now,
            lease_seconds=lease_seconds,
            crashes_max=crashes_max,
        )

    def finish(
        self,
        claim: Claim,
        ending: Ending,
        *,
        crashed: bool = False,
        progress: Progress | None = None,
    ) -> Finish:
        """Make the run final, if ``claim`` still holds it."""
        assert ending.state in FINAL, ending.state  # noqa: S101 - our mistake, never a client's
        finish = self._dispatch.finish(claim, ending.state, crashed=crashed, progress=progress)
        if finish is Finish.STORED:
            self._runs.add_ending(claim.run_id, claim.tenant, ending)
        return finish

    def give_back(self, claim: Claim, *, crashed: bool) -> int | None:
        """Let the run wait again."""
        if not self._dispatch.give_back(claim, crashed=crashed):
            return None
        return self._runs.get(claim.run_id, claim.tenant).crashes

    def fail_waiting(self, run_id: RunId, tenant: str, ending: Ending) -> bool:
        """Make a run final whose deadline passed while it waited."""
        if not self._dispatch.expire(run_id, tenant, ending.state, now=self.now):
            return False
        self._runs.add_ending(run_id, tenant, ending)
        return True

    def renew(
        self,
        tokens: Collection[Token],
        *,
        lease_seconds: float,
        progress: Mapping[Token, Progress],
    ) -> frozenset[Token]:
        """Renew leases; return the tokens that still hold a run."""
        return self._dispatch.renew(
            tokens, now=self.now, lease_seconds=lease_seconds, progress=progress
        )

    def waiting(self, *, limit: int) -> Sequence[RunId]:
        """Return runs that wait and may still be planned, oldest first."""
        return self._dispatch.waiting(now=self.now, limit=limit)

    def overdue(self, *, limit: int) -> Sequence[tuple[RunId, str]]:
        """Return (run, tenant) of runs that waited beyond their deadline."""
        return self._dispatch.overdue(now=self.now, limit=limit)

    def held(self, *, expired_only: bool, limit: int) -> Sequence[Claim]:
        """Return the claims of running runs."""
        return self._dispatch.held(expired_only=expired_only, now=self.now, limit=limit)

    def add_index_rows(self, run_id: RunId, tenant: str, rows: IndexRows) -> None:
        """Insert the search rows of a plan."""
        self._index.add(run_id, tenant, rows)

    def append(
        self,
        stream: str,
        kind: str,
        actor: Actor,
        payload: Mapping[str, object] | None,
    ) -> StoredEvent:
        """Append an event to a stream of the actor's tenant."""
        self._one_at_a_time("stream", actor.tenant, stream)
        return self._events.append(stream, kind, actor, payload, recorded_at=self.now)

    def events(self, stream: str, tenant: str) -> Sequence[StoredEvent]:
        """Return all events of a stream in order."""
        return self._events.events(stream, tenant)

    @property
    def _on_postgresql(self) -> bool:
        return self._session.get_bind().dialect.name == "postgresql"

    def _one_at_a_time(self, *names: str) -> None:
        """Wait until no other transaction works on what ``names`` name.

        SQLite has one writer anyway. On PostgreSQL a lock that the commit releases: without it two
        transactions would draw the same number, and one of them would fail for no fault of its own.
        """
        if self._on_postgresql:
            digest = hashlib.sha256("\0".join(names).encode()).digest()
            key = int.from_bytes(digest[:8], "big", signed=True)
            self._session.execute(select(func.pg_advisory_xact_lock(key)))
