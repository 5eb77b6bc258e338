"""The history of a run: events that are chained, so that none can be changed, left out or added.

The hash of an event covers its other fields in RFC 8785 form, among them the hash of the event
before it and the digest of its payload, which is salted.
"""

import hashlib
from typing import Any, Final

from service.network.canonical import canonical_json, digest
from service.network.canonical_json import NotCanonicalError
from service.proof.shapes import (
    is_any_object,
    is_count,
    is_digest,
    is_text,
    list_of,
    one_of,
    or_null,
    record,
)
from service.proof.violations import Findings

NOTHING_BEFORE: Final = "sha-256:" + "0" * 64
_SALT_HEX = 32

_EVENT = record(
    {
        "tenant": is_text,
        "stream": is_text,
        "seq": is_count,
        "format": one_of(1),
        "recorded_at": is_text,
        "kind": is_text,
        "actor": is_text,
        "authentication": is_text,
        "payload_digest": or_null(is_digest),
        "previous": is_digest,
        "hash": is_digest,
    }
)
_HISTORY = list_of(
    record({"event": _EVENT, "payload": or_null(is_any_object), "salt": or_null(is_text)})
)


def check_history(history: object, findings: Findings) -> None:
    """Note every link of the chain that is broken; ``history`` is parsed JSON of whatever shape."""
    wrong = _HISTORY(history)
    if wrong is not None or not isinstance(history, list):
        findings.add("history_malformed", "the document does not have its shape", place=str(wrong))
        return
    last: dict[tuple[str, str], dict[str, Any]] = {}
    for position, entry in enumerate(history):
        event = entry["event"]
        place = f"history/{position}"
        before = last.get((event["tenant"], event["stream"]))
        if (event["seq"], event["previous"]) != _expected(before):
            findings.add("event_chain", "it does not follow the event before it", place=place)
        last[(event["tenant"], event["stream"])] = event
        fields = {key: value for key, value in event.items() if key != "hash"}
        if digest(canonical_json(fields)) != event["hash"]:
            findings.add("event_hash", "the hash is not that of its fields", place=place)
        if not _payload_right(event["payload_digest"], entry["payload"], entry["salt"]):
            findings.add("event_payload", "the payload is not that of the event", place=place)


def _expected(before: dict[str, Any] | None) -> tuple[int, str]:
    """Return number and link of the event after ``before``."""
    return (1, NOTHING_BEFORE) if before is None else (before["seq"] + 1, before["hash"])


def _payload_right(stated: str | None, payload: object, salt: str | None) -> bool:
    """Return whether payload and salt have the digest that the event names, if it names one."""
    if stated is None:
        return payload is None and salt is None
    if payload is None or salt is None or len(salt) != _SALT_HEX or salt != salt.lower():
        return False
    try:
        data = bytes.fromhex(salt) + canonical_json(payload)
    except (ValueError, NotCanonicalError):
        return False
    return f"sha-256:{hashlib.sha256(data).hexdigest()}" == stated
