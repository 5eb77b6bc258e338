"""Event format 1: the chain as an auditor with other tools would compute it."""

import hashlib
from dataclasses import replace
from datetime import UTC, datetime, timedelta, timezone

import pytest
import rfc8785

from service.network.canonical import canonical_json
from service.runs.events import (
    NOTHING_BEFORE,
    chain_faults,
    event_document,
    event_fields,
    is_digest,
    moment_of,
    moment_text,
    next_event,
    payload_digest,
    run_stream,
)
from service.runs.run import Actor, RunId, StoredEvent

ACTOR = Actor(tenant="local", name="planner@example.com", authentication="key")
MOMENT = datetime(2026, 2, 3, 16, 0, 0, 5, tzinfo=timezone(timedelta(hours=1)))
STREAM = run_stream(RunId("run_x"))


def chain(length: int) -> list[StoredEvent]:
    """Return a whole stream; every third event has nothing to say."""
    events: list[StoredEvent] = []
    for turn in range(length):
        events.append(
            next_event(
                events[-1] if events else None,
                stream=STREAM,
                kind="claimed",
                actor=ACTOR,
                recorded_at=MOMENT,
                payload=None if turn % 3 == 2 else {"turn": turn, "text": "é€😀"},
            ),
        )
    return events


def test_hash_is_that_of_the_canonical_fields() -> None:
    """Computed here with another implementation of RFC 8785, nulls included."""
    first, second = chain(2)
    fields: dict[str, str | int | None] = {
        "tenant": "local",
        "stream": "run:run_x",
        "seq": 2,
        "format": 1,
        "recorded_at": "2026-02-03T15:00:00.000005Z",
        "kind": "claimed",
        "actor": "planner@example.com",
        "authentication": "key",
        "payload_digest": second.payload_digest,
        "previous": first.hash,
    }

    expected = "sha-256:" + hashlib.sha256(rfc8785.dumps(fields)).hexdigest()

    assert second.hash == expected
    assert event_fields(second) == fields
    assert first.previous == NOTHING_BEFORE == "sha-256:" + 64 * "0"


def test_payload_digest_begins_with_sixteen_random_bytes() -> None:
    """Without the salt an erased payload could be found again by trying."""
    first, second, third = chain(3)
    assert first.salt is not None
    assert second.salt is not None
    payload: dict[str, str | int] = {"turn": 0, "text": "é€😀"}

    expected = "sha-256:" + hashlib.sha256(first.salt + rfc8785.dumps(payload)).hexdigest()

    assert first.payload_digest == expected == payload_digest(payload, first.salt)
    assert len(first.salt) == 16
    assert first.salt != second.salt
    assert (third.payload_digest, third.payload, third.salt) == (None, None, None)


def test_history_shows_event_payload_and_salt() -> None:
    """Whoever gets the history can recompute both digests from it alone."""
    document = event_document(chain(1)[0])

    event, salt = document["event"], document["salt"]
    assert isinstance(event, dict)
    assert isinstance(salt, str)
    rest: dict[str, str | int | None] = {n: v for n, v in event.items() if n != "hash"}
    assert event["hash"] == "sha-256:" + hashlib.sha256(rfc8785.dumps(rest)).hexdigest()
    packed = bytes.fromhex(salt) + canonical_json(document["payload"])
    assert event["payload_digest"] == "sha-256:" + hashlib.sha256(packed).hexdigest()


def test_whole_chain_has_no_fault() -> None:
    """Also an empty one: nothing happened, and nothing is wrong with that."""
    assert chain_faults(chain(7)) == []
    assert chain_faults([]) == []


@pytest.mark.parametrize(
    ("change", "fault"),
    [
        ({"tenant": "other"}, "hash does not cover"),
        ({"stream": "run:run_y"}, "hash does not cover"),
        ({"format": 2}, "hash does not cover"),
        ({"recorded_at": "2026-02-03T15:00:00.000006Z"}, "hash does not cover"),
        ({"kind": "finished"}, "hash does not cover"),
        ({"actor": "somebody"}, "hash does not cover"),
        ({"authentication": "none"}, "hash does not cover"),
        ({"payload": {"turn": 7}}, "not the one the event committed to"),
        ({"payload": None}, "payload is missing"),
        ({"salt": bytes(16)}, "not the one the event committed to"),
        ({"salt": None}, "payload is missing"),
        ({"hash": NOTHING_BEFORE}, "hash does not cover"),
        ({"previous": NOTHING_BEFORE}, "previous is not the hash"),
        ({"seq": 3}, "seq is 3 where 2 was to come"),
        ({"format": 1.5}, "hash does not cover"),
    ],
)
def test_any_changed_field_is_a_fault_of_its_event(change: dict[str, object], fault: str) -> None:
    """Each field that is stored is held by the chain."""
    events = chain(4)
    events[1] = replace(events[1], **change)  # type: ignore[arg-type] # as tampered as it gets

    faults = chain_faults(events)

    assert faults[0][0] == events[1].seq
    assert fault in faults[0][1]


def test_removed_event_is_a_gap() -> None:
    """The seq tells, before any hash does; what follows the gap is not reported as well."""
    events = chain(4)

    assert chain_faults(events[:1] + events[2:]) == [(3, "seq is 3 where 2 was to come")]
    assert chain_faults(events[1:]) == [(2, "seq is 2 where 1 was to come")]


def test_swapped_events_are_noticed() -> None:
    """Nor can two events change places."""
    events = chain(4)
    events[1], events[2] = events[2], events[1]

    assert chain_faults(events)[0] == (3, "seq is 3 where 2 was to come")


def test_moment_is_utc_with_six_decimals() -> None:
    """One way to write a moment, so that text sorts by time and hashes alike everywhere."""
    text = moment_text(MOMENT)

    assert text == "2026-02-03T15:00:00.000005Z"
    assert moment_of(text) == MOMENT
    assert moment_text(datetime(2026, 2, 3, tzinfo=UTC)) == "2026-02-03T00:00:00.000000Z"


@pytest.mark.parametrize(
    "text",
    ["2026-02-03T15:00:00Z", "2026-02-03T15:00:00.000005+00:00", "2026-02-30T15:00:00.000005Z", ""],
)
def test_any_other_way_to_write_a_moment_is_refused(text: str) -> None:
    """Reading leniently would let two texts mean one moment."""
    with pytest.raises(ValueError, match=r"not a moment|day"):
        moment_of(text)


def test_moment_without_a_zone_is_refused() -> None:
    """It would be taken for UTC in one place and for local time in another."""
    with pytest.raises(ValueError, match="time zone"):
        moment_text(datetime(2026, 2, 3))  # noqa: DTZ001 - the mistake under test


def test_digest_has_one_form() -> None:
    """Lower-case hex after the name of the function, 64 of them."""
    assert is_digest(NOTHING_BEFORE)
    assert not is_digest(NOTHING_BEFORE.upper())
    assert not is_digest(NOTHING_BEFORE + "0")
    assert not is_digest("sha-256:" + "g" * 64)
