"""Evidence to try verifiers on: real plans of random networks, and ways to repack a changed one."""

import hashlib
import json
import random
import tempfile
from collections.abc import Mapping
from functools import cache
from pathlib import Path
from typing import Any

import orjson
import rfc8785

from service.network.canonical import (
    network_digest,
    network_entries,
    network_from_entries,
    read_network,
)
from service.network.columns import Network
from service.network.options import Options, read_options
from service.network.stored_zip import read_stored_zip, stored_zip
from service.planning.task import plan
from service.proof.evidence import write_evidence
from tests.factories import NetworkRefused, take_in
from tests.random_dates import with_dates
from tests.random_money import in_other_money
from tests.random_networks import draw_network
from tests.random_sharing import draw_sharing
from tests.random_tariffs import by_tariffs

Entries = dict[str, bytes]
Document = dict[str, Any]

WITH_MONEY_FROM = 24
NOTHING_BEFORE = "sha-256:" + "0" * 64


def sha256(data: bytes) -> str:
    """Return a digest as it is written in all documents."""
    return "sha-256:" + hashlib.sha256(data).hexdigest()


def event(seq: int, previous: str, payload: Document | None) -> Document:
    """Return an event of a run's stream, chained by the published oracle of RFC 8785."""
    salt = None if payload is None else bytes(range(seq, seq + 16))
    fields: Document = {
        "tenant": "local",
        "stream": "run:run_01",
        "seq": seq,
        "format": 1,
        "recorded_at": f"2026-02-03T15:00:0{seq}.000000Z",
        "kind": "submitted",
        "actor": "local",
        "authentication": "none",
        "payload_digest": None,
        "previous": previous,
    }
    if payload is not None and salt is not None:
        fields["payload_digest"] = sha256(salt + rfc8785.dumps(payload))
    document = {**fields, "hash": sha256(rfc8785.dumps(fields))}
    return {"event": document, "payload": payload, "salt": None if salt is None else salt.hex()}


def history() -> list[Document]:
    """Return three chained events, the second of which has no payload."""
    events: list[Document] = []
    payloads: tuple[Document | None, ...] = (
        {"label": "Abend ü", "lines": 3},
        None,
        {"a": [1, None]},
    )
    for seq, payload in enumerate(payloads, start=1):
        previous = events[-1]["event"]["hash"] if events else NOTHING_BEFORE
        events.append(event(seq, previous, payload))
    return events


def evidence_of(body: Mapping[str, Any], given: Mapping[str, str]) -> bytes:
    """Return the evidence of a real run of ``body``, with options as in a query."""
    options, faults = read_options(given)
    assert options is not None, faults
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        report = take_in(orjson.dumps(body), folder, options)
        if report.status != "accepted":
            raise NetworkRefused(report)
        outcome = plan(folder, options, folder)
        assert outcome.state in {"planned", "no_plan"}, outcome
        network = read_network(folder / "network.zip")
        return packed(
            network,
            options,
            (folder / "plan.json").read_bytes(),
            (folder / "certificate.json").read_bytes(),
        )


def packed(network: Network, options: Options, plan_: bytes, certificate: bytes) -> bytes:
    """Return the evidence of a plan and its certificate."""
    with tempfile.TemporaryDirectory() as name:
        path = Path(name) / "evidence.zip"
        write_evidence(
            path,
            network_entries=network_entries(network),
            options=options,
            plan_bytes=plan_,
            certificate_bytes=certificate,
            history=history(),
            versions={"lanewright": "0"},
        )
        return path.read_bytes()


@cache
def good_zip(seed: int) -> bytes:
    """Return the evidence of the random network of ``seed``; later ones have other money, too."""
    rng = random.Random(seed)  # noqa: S311 - a test that repeats, no secret
    drawn = draw_network(rng)
    if seed < WITH_MONEY_FROM:
        return evidence_of(drawn.document, drawn.options)
    stated, _ = in_other_money(drawn.document, rng)
    return evidence_of(by_tariffs(stated, rng) if seed % 2 else stated, drawn.options)


@cache
def dated_zip(seed: int) -> bytes:
    """Return the evidence of a random network on days; ``seed`` is the first that is tried."""
    rng = random.Random(seed)  # noqa: S311 - a test that repeats, no secret
    while True:
        drawn = draw_network(rng)
        try:
            return evidence_of(with_dates(drawn.document, rng), drawn.options)
        except NetworkRefused:
            # What must move on several days waits for limits over days.
            continue


@cache
def sharing_zip(seed: int) -> bytes:
    """Return the evidence of a random network whose items share limits; ``seed`` as above."""
    rng = random.Random(seed)  # noqa: S311 - a test that repeats, no secret
    while True:
        drawn = draw_sharing(rng)
        try:
            data = evidence_of(drawn.document, drawn.options)
        except NetworkRefused:
            continue
        if orjson.loads(entries_of(data)["plan.json"])["method"] == "linear_program":
            return data


def entries_of(data: bytes) -> Entries:
    """Return the entries of a sound zip."""
    entries, damaged = read_stored_zip(data)
    assert not damaged
    return entries


def repacked(entries: Entries, *, manifest: bool = True) -> bytes:
    """Return a zip of ``entries``, whose manifest names their digests if ``manifest`` is set."""
    if manifest:
        listed = json.loads(entries["manifest.json"])
        listed["entries"] = {
            name: sha256(data) for name, data in entries.items() if name != "manifest.json"
        }
        entries = {**entries, "manifest.json": rfc8785.dumps(listed)}
    return stored_zip(entries)


def with_network(entries: Entries, network: Network) -> Entries:
    """Return ``entries`` about another network, with the digests of its documents put right."""
    rest = {name: data for name, data in entries.items() if not name.startswith("network/")}
    plan_, certificate = orjson.loads(rest["plan.json"]), orjson.loads(rest["certificate.json"])
    found = network_digest(network)
    plan_["network_digest"] = certificate["network_digest"] = found
    plan_["certificate"]["network_digest"] = found
    rest["plan.json"], rest["certificate.json"] = orjson.dumps(plan_), orjson.dumps(certificate)
    return {**rest, **network_entries(network)}


def with_options(entries: Entries, options: Document) -> Entries:
    """Return ``entries`` under other options, with the digests of its documents put right."""
    data = rfc8785.dumps(options)
    plan_, certificate = (
        orjson.loads(entries["plan.json"]),
        orjson.loads(entries["certificate.json"]),
    )
    plan_["options_digest"] = certificate["options_digest"] = sha256(data)
    return {
        **entries,
        "options.json": data,
        "plan.json": orjson.dumps(plan_),
        "certificate.json": orjson.dumps(certificate),
    }


def network_of(entries: Entries) -> Network:
    """Return the network of evidence."""
    parts = {name: data for name, data in entries.items() if name.startswith("network/")}
    return network_from_entries(parts)
