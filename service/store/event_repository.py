"""The events of a stream and their payloads: appended, never anything else."""

from collections.abc import Iterator, Mapping, Sequence
from datetime import datetime

import orjson
from sqlalchemy import select
from sqlalchemy.orm import Session

from service.network.canonical import canonical_json
from service.runs.events import next_event
from service.runs.run import Actor, StoredEvent
from service.store.tables import EventPayloadRow, EventRow

_FETCHED_AT_ONCE = 500


class SqlEventRepository:
    """Append-only store of chains of events."""

    def __init__(self, session: Session) -> None:
        """Work inside the caller's transaction; never commit here."""
        self._session = session

    def append(
        self,
        stream: str,
        kind: str,
        actor: Actor,
        payload: Mapping[str, object] | None,
        *,
        recorded_at: datetime,
    ) -> StoredEvent:
        """Append to the stream; the caller holds the lock that makes it the only one.

        Without that lock the key (tenant, stream, seq) still lets one of two through.
        """
        event = next_event(
            self._last(stream, actor.tenant),
            stream=stream,
            kind=kind,
            actor=actor,
            recorded_at=recorded_at,
            payload=payload,
        )
        self._session.add(
            EventRow(
                tenant=event.tenant,
                stream=event.stream,
                seq=event.seq,
                format=event.format,
                recorded_at=event.recorded_at,
                kind=event.kind,
                actor=event.actor,
                authentication=event.authentication,
                payload_digest=event.payload_digest,
                previous=event.previous,
                hash=event.hash,
            ),
        )
        self._session.flush()
        if event.payload is not None:
            self._session.add(
                EventPayloadRow(
                    tenant=event.tenant,
                    stream=event.stream,
                    seq=event.seq,
                    salt=event.salt,
                    payload=canonical_json(dict(event.payload)).decode(),
                ),
            )
            self._session.flush()
        return event

    def events(self, stream: str, tenant: str) -> Sequence[StoredEvent]:
        """Return all events of one stream in order; empty when there is no such stream."""
        return [
            event_of(row, None if payload is None else orjson.loads(payload.payload), payload)
            for row, payload in self.rows(stream, tenant)
        ]

    def rows(self, stream: str, tenant: str) -> Iterator[tuple[EventRow, EventPayloadRow | None]]:
        """Yield the rows of one stream in order, unread: an audit trusts none of them."""
        statement = (
            select(EventRow, EventPayloadRow)
            .outerjoin(
                EventPayloadRow,
                (EventPayloadRow.tenant == EventRow.tenant)
                & (EventPayloadRow.stream == EventRow.stream)
                & (EventPayloadRow.seq == EventRow.seq),
            )
            .where(EventRow.tenant == tenant, EventRow.stream == stream)
            .order_by(EventRow.seq)
        )
        for row in self._session.execute(statement):
            yield row[0], row[1]

    def streams(self) -> Iterator[tuple[str, str]]:
        """Yield (tenant, stream) of every stream there is."""
        statement = (
            select(EventRow.tenant, EventRow.stream)
            .distinct()
            .order_by(EventRow.tenant, EventRow.stream)
            .execution_options(yield_per=_FETCHED_AT_ONCE)
        )
        with self._session.execute(statement) as found:
            for row in found:
                yield row.tenant, row.stream

    def _last(self, stream: str, tenant: str) -> StoredEvent | None:
        statement = (
            select(EventRow)
            .where(EventRow.tenant == tenant, EventRow.stream == stream)
            .order_by(EventRow.seq.desc())
            .limit(1)
        )
        row = self._session.scalar(statement)
        return None if row is None else event_of(row, None, None)


def event_of(
    row: EventRow,
    payload: Mapping[str, object] | None,
    payload_row: EventPayloadRow | None,
) -> StoredEvent:
    """Return the row as the use cases know it, with what was read of its payload."""
    return StoredEvent(
        tenant=row.tenant,
        stream=row.stream,
        seq=row.seq,
        format=row.format,
        recorded_at=row.recorded_at,
        kind=row.kind,
        actor=row.actor,
        authentication=row.authentication,
        payload_digest=row.payload_digest,
        previous=row.previous,
        hash=row.hash,
        payload=payload,
        salt=None if payload_row is None else payload_row.salt,
    )
