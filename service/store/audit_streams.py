"""The audit of chains of events: seq, previous, hash, and the payloads they commit to."""

from collections.abc import Iterator, Mapping

import orjson
from sqlalchemy.orm import Session

from service.network.canonical import canonical_json
from service.runs.events import EVENT_FORMAT, chain_faults
from service.runs.run import StoredEvent
from service.store.audit_problem import Problem
from service.store.event_repository import SqlEventRepository, event_of


def read_stream(
    session: Session,
    tenant: str,
    stream: str,
) -> tuple[list[StoredEvent], list[Problem]]:
    """Return the events of a stream, and what is wrong with their payloads as text."""
    events: list[StoredEvent] = []
    problems: list[Problem] = []
    for row, payload_row in SqlEventRepository(session).rows(stream, tenant):
        payload: Mapping[str, object] | None = None
        if payload_row is not None:
            payload = _payload(payload_row.payload)
            if payload is None:
                problems.append(
                    Problem(
                        code="chain",
                        place=f"{tenant}/{stream}#{row.seq}",
                        detail="the payload is no JSON object in canonical form",
                    ),
                )
        events.append(event_of(row, payload, payload_row))
    return events, problems


def stream_problems(session: Session) -> Iterator[Problem]:
    """Yield every broken link of every stream, streams in order of their names."""
    for tenant, stream in list(SqlEventRepository(session).streams()):
        events, problems = read_stream(session, tenant, stream)
        yield from problems
        for seq, fault in chain_faults(events):
            yield Problem(code="chain", place=f"{tenant}/{stream}#{seq}", detail=fault)
        for event in events:
            if event.format != EVENT_FORMAT:
                yield Problem(
                    code="event_format",
                    place=f"{tenant}/{stream}#{event.seq}",
                    detail=f"format {event.format} is none that this release knows",
                )
        session.expunge_all()


def _payload(text: str) -> Mapping[str, object] | None:
    try:
        payload = orjson.loads(text)
        canonical = canonical_json(payload).decode()
    except ValueError:
        return None
    return payload if isinstance(payload, dict) and canonical == text else None
