"""The audit of runs: their rows against their history, and their numbers against each other."""

from collections.abc import Iterator, Mapping
from typing import Any

from sqlalchemy import Text, select, type_coerce
from sqlalchemy.orm import Session

from service.network.canonical import canonical_json
from service.runs.events import moment_text, run_stream
from service.runs.records import EventKind, finished_payload, submitted_payload
from service.runs.run import RunId, RunState, StoredEvent
from service.store.audit_problem import Problem, guarded
from service.store.audit_streams import read_stream
from service.store.event_repository import SqlEventRepository
from service.store.run_repository import ending_of, submission_of
from service.store.tables import RunDispatchRow, RunEndingRow, RunRow

_STREAM_PREFIX = run_stream(RunId(""))


def run_keys(session: Session) -> list[tuple[str, str]]:
    """Return (tenant, id) of every run, in order."""
    statement = select(RunRow.tenant, RunRow.id).order_by(RunRow.tenant, RunRow.id)
    return [(row.tenant, row.id) for row in session.execute(statement)]


def number_problems(session: Session) -> Iterator[Problem]:
    """Yield gaps in the numbers of a date, and histories whose run is gone."""
    before: tuple[str, str] | None = None
    expected = 1
    statement = select(
        RunRow.tenant,
        # As text on SQLite, where a date that was tampered with could not be read as one.
        type_coerce(RunRow.plan_for, Text).label("plan_for"),
        RunRow.number,
    ).order_by(RunRow.tenant, RunRow.plan_for, RunRow.number)
    for row in session.execute(statement):
        key = (row.tenant, str(row.plan_for))
        if key != before:
            before, expected = key, 1
        while expected < row.number:
            yield Problem(
                code="number_gap",
                place=f"{row.tenant}/run {key[1]}/{expected}",
                detail="no run has this number, though a later one has the next",
            )
            expected += 1
        expected = row.number + 1
    known = {(tenant, run_stream(RunId(run))) for tenant, run in run_keys(session)}
    for tenant, stream in SqlEventRepository(session).streams():
        if stream.startswith(_STREAM_PREFIX) and (tenant, stream) not in known:
            yield Problem(
                code="run_missing",
                place=f"{tenant}/{stream}",
                detail="a history whose run is not there",
            )


def run_problems(session: Session, tenant: str, run_id: str) -> Iterator[Problem]:
    """Yield where the rows of one run do not say what its history says."""
    events, _ = read_stream(session, tenant, run_stream(RunId(run_id)))
    place = f"{tenant}/run {run_id}"
    for code, find in (
        ("run_row", _submission_problems),
        ("ending_row", _ending_problems),
        ("dispatch_row", _dispatch_problems),
    ):
        yield from guarded(find(session, tenant, run_id, events), code=code, place=place)


def _submission_problems(
    session: Session,
    tenant: str,
    run_id: str,
    events: list[StoredEvent],
) -> Iterator[Problem]:
    place = f"{tenant}/run {run_id}"
    row = session.get_one(RunRow, (tenant, run_id))
    first = events[0] if events else None
    if first is None or first.kind != EventKind.SUBMITTED:
        yield Problem(code="run_row", place=place, detail="its history does not begin")
        return
    submission = submission_of(row)
    # As text: a count that became "3" instead of 3 is another row.
    if not _same(submitted_payload(submission), first.payload):
        yield Problem(code="run_row", place=place, detail="the row is not what was submitted")
    if (row.submitted_by, row.authentication, moment_text(row.created_at)) != (
        first.actor,
        first.authentication,
        first.recorded_at,
    ):
        yield Problem(
            code="run_row",
            place=place,
            detail="the row names another time or person than the event",
        )


def _ending_problems(
    session: Session,
    tenant: str,
    run_id: str,
    events: list[StoredEvent],
) -> Iterator[Problem]:
    place = f"{tenant}/run {run_id}"
    row = session.get(RunEndingRow, (tenant, run_id))
    finished = [event for event in events if event.kind == EventKind.FINISHED]
    if len(finished) > 1:
        yield Problem(code="ending_row", place=place, detail="the history ends more than once")
    if (row is None) != (not finished):
        detail = "the row is missing" if row is None else "the history knows of no end"
        yield Problem(code="ending_row", place=place, detail=detail)
    elif row is not None:
        said = finished[-1].payload or {}
        crashes = said.get("crashes")
        payload = finished_payload(
            ending_of(row),
            crashes=crashes if isinstance(crashes, int) else -1,
        )
        if not _same(payload, said):
            yield Problem(code="ending_row", place=place, detail="the row is not how the run ended")


def _dispatch_problems(
    session: Session,
    tenant: str,
    run_id: str,
    events: list[StoredEvent],
) -> Iterator[Problem]:
    place = f"{tenant}/run_dispatch {run_id}"
    row = session.get(RunDispatchRow, (tenant, run_id))
    if row is None:
        yield Problem(code="dispatch_row", place=place, detail="the row is missing")
        return
    run = session.get_one(RunRow, (tenant, run_id))
    expected: dict[str, object] = {
        "state": _state_after(events),
        "attempt": sum(event.kind == EventKind.CLAIMED for event in events),
        "crashes": _last_said(events, "crashes", 0),
        "deadline_at": moment_text(run.deadline_at),
        "started_at": _last_claimed_at(events),
    }
    found: dict[str, object] = {
        "state": row.state,
        "attempt": row.attempt,
        "crashes": row.crashes,
        "deadline_at": moment_text(row.deadline_at),
        "started_at": None if row.started_at is None else moment_text(row.started_at),
    }
    for column, value in expected.items():
        if found[column] != value:
            yield Problem(
                code="dispatch_row",
                place=place,
                detail=f"{column} is not what the history says",
            )


def _state_after(events: list[StoredEvent]) -> str:
    last = events[-1] if events else None
    if last is None or last.kind in {EventKind.SUBMITTED, EventKind.GIVEN_BACK}:
        return RunState.WAITING
    if last.kind == EventKind.CLAIMED:
        return RunState.RUNNING
    return str((last.payload or {}).get("state"))


def _last_claimed_at(events: list[StoredEvent]) -> str | None:
    claims = [event.recorded_at for event in events if event.kind == EventKind.CLAIMED]
    return claims[-1] if claims else None


def _last_said(events: list[StoredEvent], name: str, default: object) -> object:
    for event in reversed(events):
        if event.payload is not None and name in event.payload:
            return event.payload[name]
    return default


def _same(expected: Mapping[str, Any], found: Mapping[str, object] | None) -> bool:
    return found is not None and canonical_json(dict(expected)) == canonical_json(dict(found))
