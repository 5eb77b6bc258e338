"""The dispatch rows: who holds which run, fenced by tokens. The one place that updates rows.

Every statement carries the states that ``runs/lifecycle.py`` allows the move to start from, so that
of several that try, the database lets one through.
"""

from collections.abc import Collection, Mapping, Sequence
from datetime import datetime, timedelta
from typing import Any, Final

from sqlalchemy import ColumnElement, and_, case, or_, select, update
from sqlalchemy.orm import Session

from service.runs.lifecycle import FINAL, RULES, Move
from service.runs.run import Claim, Finish, Needs, Progress, RunId, RunState, Token
from service.store.run_repository import progress_text
from service.store.tables import RunDispatchRow

_Values = dict[str, Any]
_NO_HOLDER: Final[_Values] = {"token": None, "lease_until": None}


class SqlDispatchRepository:
    """Moves runs from state to state."""

    def __init__(self, session: Session) -> None:
        """Work inside the caller's transaction; never commit here."""
        self._session = session

    def claim(
        self,
        run_id: RunId,
        *,
        token: Token,
        now: datetime,
        lease_seconds: float,
        crashes_max: int,
    ) -> Claim | None:
        """Give the run to ``token``; None when somebody else holds it or its time is over.

        Which run is asked for is the caller's choice, in the order of ``waiting``.
        A lease that ran out counts as a crash of its holder; the last crash is not this method's to
        count, since it ends the run.
        """
        expired = and_(
            _from(Move.TAKE_OVER),
            RunDispatchRow.lease_until < now,
            RunDispatchRow.crashes < crashes_max - 1,
        )
        statement = (
            update(RunDispatchRow)
            .where(
                RunDispatchRow.run == run_id,
                RunDispatchRow.deadline_at > now,
                or_(_from(Move.CLAIM), expired),
            )
            .values(
                state=RunState.RUNNING,
                attempt=RunDispatchRow.attempt + 1,
                crashes=case(
                    (_from(Move.TAKE_OVER), RunDispatchRow.crashes + 1),
                    else_=RunDispatchRow.crashes,
                ),
                token=token,
                lease_until=now + timedelta(seconds=lease_seconds),
                started_at=now,
                progress=None,
            )
            .returning(*_CLAIMED)
            .execution_options(synchronize_session=False)
        )
        row = self._session.execute(statement).one_or_none()
        return None if row is None else _claim(row, now)

    def finish(
        self, claim: Claim, state: RunState, *, crashed: bool, progress: Progress | None
    ) -> Finish:
        """Make the run final if ``claim`` holds it; say whether this claim did so before.

        ``progress`` None leaves what was told last.
        """
        values: _Values = {"state": state, "finished_token": claim.token, **_NO_HOLDER}
        if progress is not None:
            values["progress"] = progress_text(progress)
        if crashed:
            values["crashes"] = RunDispatchRow.crashes + 1
        if self._change(claim, _from(Move.FINISH), values):
            return Finish.STORED
        finished = self._session.scalar(
            select(RunDispatchRow.finished_token).where(
                RunDispatchRow.tenant == claim.tenant,
                RunDispatchRow.run == claim.run_id,
            ),
        )
        return Finish.ALREADY_STORED if finished == claim.token else Finish.FENCED

    def give_back(self, claim: Claim, *, crashed: bool) -> bool:
        """Let the run wait again if ``claim`` holds it."""
        values: _Values = {"state": RunState.WAITING, "progress": None, **_NO_HOLDER}
        if crashed:
            values["crashes"] = RunDispatchRow.crashes + 1
        return self._change(claim, _from(Move.GIVE_BACK), values)

    def expire(self, run_id: RunId, tenant: str, state: RunState, *, now: datetime) -> bool:
        """Make a run final that waited beyond its deadline; False when it does not."""
        statement = (
            update(RunDispatchRow)
            .where(
                RunDispatchRow.tenant == tenant,
                RunDispatchRow.run == run_id,
                RunDispatchRow.deadline_at <= now,
                _from(Move.EXPIRE),
            )
            .values(state=state)
            .returning(RunDispatchRow.run)
            .execution_options(synchronize_session=False)
        )
        return self._session.execute(statement).one_or_none() is not None

    def renew(
        self,
        tokens: Collection[Token],
        *,
        now: datetime,
        lease_seconds: float,
        progress: Mapping[Token, Progress],
    ) -> frozenset[Token]:
        """Renew the leases of ``tokens``; return those that still hold a run.

        How far they are goes along: a statement of its own would be one more write to the disk.
        """
        if not tokens:
            return frozenset()
        values: _Values = {"lease_until": now + timedelta(seconds=lease_seconds)}
        if progress:
            values["progress"] = case(
                {token: progress_text(told) for token, told in progress.items()},
                value=RunDispatchRow.token,
                else_=RunDispatchRow.progress,
            )
        statement = (
            update(RunDispatchRow)
            .where(RunDispatchRow.token.in_(tokens), _from(Move.RENEW))
            .values(**values)
            .returning(RunDispatchRow.token)
            .execution_options(synchronize_session=False)
        )
        return frozenset(Token(str(token)) for token in self._session.scalars(statement))

    def waiting(self, *, now: datetime, limit: int) -> Sequence[RunId]:
        """Return runs that wait and may still be planned, in the order of submission."""
        statement = (
            select(RunDispatchRow.run)
            .where(_from(Move.CLAIM), RunDispatchRow.deadline_at > now)
            .order_by(RunDispatchRow.run)
            .limit(limit)
        )
        return [RunId(run) for run in self._session.scalars(statement)]

    def overdue(self, *, now: datetime, limit: int) -> Sequence[tuple[RunId, str]]:
        """Return (run, tenant) of runs that waited beyond their deadline."""
        statement = (
            select(RunDispatchRow.run, RunDispatchRow.tenant)
            .where(_from(Move.EXPIRE), RunDispatchRow.deadline_at <= now)
            .order_by(RunDispatchRow.run)
            .limit(limit)
        )
        return [(RunId(row.run), row.tenant) for row in self._session.execute(statement)]

    def held(self, *, expired_only: bool, now: datetime, limit: int) -> Sequence[Claim]:
        """Return the claims of running runs, oldest first, locked until the transaction ends.

        On PostgreSQL a claim that another transaction has locked is left out: of two sweepers, one
        acts; and a holder that is just renewing its lease keeps it.
        """
        statement = (
            select(RunDispatchRow)
            .where(_from(Move.GIVE_BACK))
            .order_by(RunDispatchRow.run)
            .limit(limit)
            .with_for_update(skip_locked=True)
            .execution_options(populate_existing=True)
        )
        if expired_only:
            statement = statement.where(RunDispatchRow.lease_until < now)
        return [_claim(row, now) for row in self._session.scalars(statement)]

    def _change(self, claim: Claim, allowed: ColumnElement[bool], values: _Values) -> bool:
        statement = (
            update(RunDispatchRow)
            .where(
                RunDispatchRow.tenant == claim.tenant,
                RunDispatchRow.run == claim.run_id,
                RunDispatchRow.token == claim.token,
                allowed,
            )
            .values(**values)
            .returning(RunDispatchRow.run)
            .execution_options(synchronize_session=False)
        )
        return self._session.execute(statement).one_or_none() is not None


_CLAIMED: Final = (
    RunDispatchRow.run,
    RunDispatchRow.tenant,
    RunDispatchRow.token,
    RunDispatchRow.attempt,
    RunDispatchRow.crashes,
    RunDispatchRow.deadline_at,
    RunDispatchRow.likeness,
    RunDispatchRow.memory_bytes,
)


def _claim(row: Any, now: datetime) -> Claim:  # noqa: ANN401 - a whole row, or the columns above
    return Claim(
        run_id=RunId(row.run),
        tenant=row.tenant,
        token=Token(str(row.token)),
        attempt=row.attempt,
        crashes=row.crashes,
        deadline_at=row.deadline_at,
        seconds_left=(row.deadline_at - now).total_seconds(),
        needs=Needs(likeness=row.likeness, memory_bytes=row.memory_bytes),
    )


def _from(move: Move) -> ColumnElement[bool]:
    sources = sorted(RULES[move].sources)
    assert not FINAL.intersection(sources), move  # noqa: S101 - our mistake, never a client's
    if len(sources) == 1:
        return RunDispatchRow.state == sources[0]
    return RunDispatchRow.state.in_(sources)
