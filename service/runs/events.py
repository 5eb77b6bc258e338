"""Event format 1: what was done to a stream, chained so that nothing can be changed unseen.

The hash of an event covers its other fields in RFC 8785 form, among them the hash of the event
before it and the digest of its payload. The payload itself lies beside the event with the salt of
its digest, so that it can be erased one day without breaking the chain, and so that nobody can
guess an erased payload by trying.
"""

import re
import secrets
from collections.abc import Mapping, Sequence
from datetime import UTC, datetime
from typing import Final

from service.network.canonical import canonical_json, digest
from service.runs.run import Actor, RunId, StoredEvent

EVENT_FORMAT: Final = 1
SALT_BYTES: Final = 16
NOTHING_BEFORE: Final = "sha-256:" + "0" * 64
"""The ``previous`` of the first event of a stream."""

_DIGEST: Final = re.compile(r"sha-256:[0-9a-f]{64}", re.ASCII)
_MOMENT: Final = re.compile(r"\d{4}-\d\d-\d\dT\d\d:\d\d:\d\d\.\d{6}Z", re.ASCII)


def run_stream(run_id: RunId) -> str:
    """Return the name of the stream that holds the history of a run."""
    return f"run:{run_id}"


def is_digest(text: str) -> bool:
    """Return whether ``text`` has the form of a digest."""
    return _DIGEST.fullmatch(text) is not None


def moment_text(moment: datetime) -> str:
    """Return ``moment`` in UTC with six decimals and ``Z``; such texts sort by time."""
    if moment.tzinfo is None:
        raise ValueError("a moment needs its time zone")
    return moment.astimezone(UTC).isoformat(timespec="microseconds").replace("+00:00", "Z")


def moment_of(text: str) -> datetime:
    """Return the moment that ``moment_text`` wrote."""
    if _MOMENT.fullmatch(text) is None:
        raise ValueError(f"not a moment in UTC with six decimals: {text!r}")
    return datetime.fromisoformat(text)


def payload_digest(payload: Mapping[str, object], salt: bytes) -> str:
    """Return the digest by which an event commits to its payload."""
    return digest(salt + canonical_json(payload))


def event_fields(event: StoredEvent) -> dict[str, object]:
    """Return the fields that the hash covers, nulls included."""
    return {
        "tenant": event.tenant,
        "stream": event.stream,
        "seq": event.seq,
        "format": event.format,
        "recorded_at": event.recorded_at,
        "kind": event.kind,
        "actor": event.actor,
        "authentication": event.authentication,
        "payload_digest": event.payload_digest,
        "previous": event.previous,
    }


def event_hash(fields: Mapping[str, object]) -> str:
    """Return the hash of an event with these ``fields`` (without ``hash``)."""
    return digest(canonical_json(fields))


def next_event(  # noqa: PLR0913 - what an event is made of
    last: StoredEvent | None,
    *,
    stream: str,
    kind: str,
    actor: Actor,
    recorded_at: datetime,
    payload: Mapping[str, object] | None,
) -> StoredEvent:
    """Return the event that follows ``last`` in ``stream`` (None: the stream is empty)."""
    salt = None if payload is None else secrets.token_bytes(SALT_BYTES)
    fields: dict[str, object] = {
        "tenant": actor.tenant,
        "stream": stream,
        "seq": 1 if last is None else last.seq + 1,
        "format": EVENT_FORMAT,
        "recorded_at": moment_text(recorded_at),
        "kind": kind,
        "actor": actor.name,
        "authentication": actor.authentication,
        "payload_digest": (
            None if payload is None or salt is None else payload_digest(payload, salt)
        ),
        "previous": NOTHING_BEFORE if last is None else last.hash,
    }
    return StoredEvent(
        **fields,  # type: ignore[arg-type] # the dict above is the typed list of these fields
        hash=event_hash(fields),
        payload=payload,
        salt=salt,
    )


def event_document(event: StoredEvent) -> dict[str, object]:
    """Return the event as history and evidence show it."""
    return {
        "event": {**event_fields(event), "hash": event.hash},
        "payload": None if event.payload is None else dict(event.payload),
        "salt": None if event.salt is None else event.salt.hex(),
    }


def chain_faults(events: Sequence[StoredEvent]) -> list[tuple[int, str]]:
    """Return (seq, what is wrong) for every broken link of one whole stream; empty means intact.

    ``events`` are in the order of their seq. A payload that is missing although the event commits
    to one is a fault here: nothing erases payloads yet.
    """
    faults: list[tuple[int, str]] = []
    previous = NOTHING_BEFORE
    for expected, event in enumerate(events, start=1):
        if event.seq != expected:
            faults.append((event.seq, f"seq is {event.seq} where {expected} was to come"))
            return faults  # everything after a gap would be reported too, and mislead
        if event.previous != previous:
            faults.append((event.seq, "previous is not the hash of the event before"))
        if not _hash_covers(event):
            faults.append((event.seq, "hash does not cover the fields of the event"))
        faults += [(event.seq, fault) for fault in _payload_faults(event)]
        previous = event.hash
    return faults


def _hash_covers(event: StoredEvent) -> bool:
    try:
        return event_hash(event_fields(event)) == event.hash
    except ValueError:  # a field that has no canonical form was never hashed
        return False


def _payload_faults(event: StoredEvent) -> list[str]:
    if event.payload_digest is None:
        return [] if event.payload is None else ["a payload where the event says there is none"]
    if event.payload is None or event.salt is None:
        return ["the payload is missing"]
    if payload_digest(event.payload, event.salt) != event.payload_digest:
        return ["the payload is not the one the event committed to"]
    return []
