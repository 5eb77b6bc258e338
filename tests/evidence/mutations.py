"""Ways to spoil evidence: bytes, documents, options, history and the network itself.

Each takes the entries of sound evidence and returns a zip. Where it makes the change worth looking
at, the digests that would give it away are put right, as a forger would do.
"""

import contextlib
import json
from collections.abc import Callable
from dataclasses import fields, replace
from random import Random
from typing import Any

import numpy as np
import orjson

from service.network.canonical import NormalFormError, normal_form
from service.network.columns import Decimals, Network
from tests.evidence.zips import (
    Document,
    Entries,
    network_of,
    repacked,
    sha256,
    with_network,
    with_options,
)

Mutation = Callable[[Entries, Random], bytes]

# What a value may become: other types, edges of ranges, and texts that look like numbers.
STRANGE: tuple[Any, ...] = (
    None,
    True,
    0,
    -1,
    1,
    2**53,
    10**25,
    1.5,
    "",
    "0",
    "-0",
    "1.50",
    "1/3",
    "2/4",
    "1e3",
    "unknown",
    "\u0000",
    "\ud800",
    "sha-256:" + "0" * 64,
    [],
    {},
    [[]],
)


def flip_any_byte(entries: Entries, rng: Random) -> bytes:
    """Flip bits of one byte anywhere in the file."""
    data = bytearray(repacked(entries, manifest=False))
    data[rng.randrange(len(data))] ^= rng.randrange(1, 256)
    return bytes(data)


def cut_or_append(entries: Entries, rng: Random) -> bytes:
    """Cut the file off, or put bytes behind or before it."""
    data = repacked(entries, manifest=False)
    part = data[: rng.randrange(len(data))]
    return rng.choice([part, data + rng.randbytes(3), rng.randbytes(3) + data, b"", data + data])


def flip_entry_byte(entries: Entries, rng: Random) -> bytes:
    """Flip bits of one byte of an entry; sometimes the manifest follows."""
    name = rng.choice(sorted(entries))
    if entries[name]:
        data = bytearray(entries[name])
        data[rng.randrange(len(data))] ^= rng.choice([1, 2, 4, 16, 128, 255])
        entries = {**entries, name: bytes(data)}
    follows = name != "manifest.json" and rng.random() < 0.8
    return repacked(entries, manifest=follows)


def flip_column_byte(entries: Entries, rng: Random) -> bytes:
    """Flip bits of one byte of a column; head, documents and manifest follow."""
    columns = [name for name in entries if name.count("/") == 2]
    name = rng.choice(sorted(columns))
    data = bytearray(entries[name])
    data[rng.randrange(len(data))] ^= rng.choice([1, 2, 8, 64, 255])
    return repacked(_with_column(entries, name, bytes(data)))


def change_head(entries: Entries, rng: Random) -> bytes:
    """Change anything in the head of the network; documents and manifest follow."""
    head = json.loads(entries["network/head.json"])
    change_somewhere(head, rng)
    return repacked(_with_head(entries, head))


def move_entries(entries: Entries, rng: Random) -> bytes:
    """Leave an entry out, add one, or exchange the contents of two."""
    entries = dict(entries)
    first, second = rng.sample(sorted(entries), 2)
    choice = rng.randrange(3)
    if choice == 0:
        del entries[first]
    elif choice == 1:
        entries["network/lanes/" + rng.choice(["speed", "id", "zebra"])] = b"\0" * 8
    else:
        entries[first], entries[second] = entries[second], entries[first]
    follows = "manifest.json" in entries and "manifest.json" not in (first, second)
    return repacked(entries, manifest=follows and rng.random() < 0.7)


def change_manifest(entries: Entries, rng: Random) -> bytes:
    """Change anything in the manifest."""
    manifest = json.loads(entries["manifest.json"])
    change_somewhere(manifest, rng)
    return repacked({**entries, "manifest.json": _dumped(manifest)}, manifest=False)


def _document_change(name: str) -> Mutation:
    """Return a mutation that changes one to three places of a document."""

    def change(entries: Entries, rng: Random) -> bytes:
        document = orjson.loads(entries[name])
        for _ in range(rng.choice([1, 1, 1, 2, 3])):
            change_somewhere(document, rng)
        return repacked({**entries, name: _dumped(document)})

    return change


change_plan = _document_change("plan.json")
change_certificate = _document_change("certificate.json")
change_history = _document_change("history.json")


def change_numbers(entries: Entries, rng: Random) -> bytes:
    """Add something small to one number of plan or certificate, keeping it a number."""
    name = rng.choice(["plan.json", "certificate.json", "certificate.json"])
    document = orjson.loads(entries[name])
    places = [place for place in _places(document) if _is_number(place[0][place[1]])]
    if places:
        holder, key = rng.choice(places)
        value = holder[key]
        if isinstance(value, str):
            holder[key] = str(int(value.partition(".")[0].partition("/")[0]) + rng.choice([-1, 1]))
        else:
            holder[key] = max(0, value + rng.choice([-1, 1]))
    return repacked({**entries, name: _dumped(document)})


def exchange_names(entries: Entries, rng: Random) -> bytes:
    """Put in place of one text of plan or certificate another that stands under the same key."""
    name = rng.choice(["plan.json", "certificate.json"])
    document = orjson.loads(entries[name])
    texts: dict[str, list[tuple[Any, Any]]] = {}
    for holder, key in _places(document):
        if isinstance(key, str) and isinstance(holder[key], str):
            texts.setdefault(key, []).append((holder, key))
    several = [places for _, places in sorted(texts.items()) if len(places) > 1]
    if several:
        (first, key), (second, _) = rng.sample(rng.choice(several), 2)
        first[key] = second[key]
    return repacked({**entries, name: _dumped(document)})


def change_rows(entries: Entries, rng: Random) -> bytes:
    """Leave out, double or exchange rows of a table of plan or certificate."""
    name = rng.choice(["plan.json", "plan.json", "certificate.json"])
    document = orjson.loads(entries[name])
    lists = [
        holder[key]
        for holder, key in _places(document)
        if isinstance(holder[key], list) and holder[key]
    ]
    if lists:
        rows = rng.choice(lists)
        at = rng.randrange(len(rows))
        choice = rng.randrange(3)
        if choice == 0:
            del rows[at]
        elif choice == 1:
            rows.insert(at, rows[at])
        else:
            rows[at], rows[-1] = rows[-1], rows[at]
    return repacked({**entries, name: _dumped(document)})


def change_options(entries: Entries, rng: Random) -> bytes:
    """Change an option; documents and manifest follow."""
    options = json.loads(entries["options.json"])
    key = rng.choice(sorted(options))
    options[key] = rng.choice(
        ["allow", "forbid", "refuse", "up", "down", "set_aside", "2", "0.5", *STRANGE]
    )
    try:
        return repacked(with_options(entries, options))
    except (ValueError, TypeError, OverflowError):
        # Some values have no canonical form: then the bytes are those of ordinary JSON.
        return repacked({**entries, "options.json": _dumped(options)})


def change_network(entries: Entries, rng: Random) -> bytes:
    """Plan as before, but for a network that is a little different; all digests follow."""
    network = network_of(entries)
    change = rng.choice([_other_number, _other_number, _without_rows, _without_rule, _other_thing])
    changed = change(network, rng)
    # A unit without meaning cannot be sorted by: then the rows stay as they are.
    with contextlib.suppress(NormalFormError):
        changed = normal_form(changed)
    return repacked(with_network(entries, changed))


def _other_number(network: Network, rng: Random) -> Network:
    """Return the network with one number of a table changed a little."""
    name = rng.choice(["supply", "demand", "lanes", "lanes"])
    table = getattr(network, name)
    columns = [
        field.name
        for field in fields(table)
        if isinstance(getattr(table, field.name), Decimals)
        and getattr(table, field.name).present.any()
    ]
    if not columns:
        return network
    field = rng.choice(columns)
    column: Decimals = getattr(table, field)
    row = int(rng.choice(np.flatnonzero(column.present).tolist()))
    values = column.values.copy()
    values[row] = max(0, int(values[row]) + rng.choice([-3, -1, 1, 2, 10, 10**9]))
    changed = replace(column, values=values)
    return replace(network, **{name: replace(table, **{field: changed})})


def _without_rows(network: Network, rng: Random) -> Network:
    """Return the network without one row of a table."""
    name = rng.choice(["supply", "demand", "lanes", "lanes"])
    table = getattr(network, name)
    if not len(table):
        return network
    gone = rng.randrange(len(table))
    keep = np.array([row for row in range(len(table)) if row != gone], dtype=np.int64)
    changed: dict[str, Any] = {}
    for field in fields(table):
        column = getattr(table, field.name)
        if isinstance(column, Decimals):
            changed[field.name] = replace(
                column, values=column.values[keep], present=column.present[keep]
            )
        elif hasattr(column, "codes"):
            changed[field.name] = replace(column, codes=column.codes[keep])
        else:
            changed[field.name] = column[keep]
    return replace(network, **{name: replace(table, **changed)})


def _without_rule(network: Network, rng: Random) -> Network:
    """Return the network with a rule less, or with one more."""
    rules: list[Document] = list(network.head["rules"])  # type: ignore[call-overload] # a list in every head
    if rules and rng.random() < 0.4:
        rules.pop(rng.randrange(len(rules)))
    else:
        site, item = rng.choice(network.sites).id, rng.choice(network.items).id
        rules.append(
            rng.choice(
                [
                    {"rule": "closure", "sites": {"ids": [site]}},
                    {"rule": "closure", "lanes": {"origin": [site]}, "items": {"ids": [item]}},
                    {"rule": "closure", "lanes": {}, "until": "2020-01-01"},
                    {"rule": "fixed_quantity", "lanes": {"origin": [site]}, "quantity": "1"},
                    {
                        "rule": "throughput",
                        "sites": {"ids": [site]},
                        "flow": rng.choice(["sent", "received", "through"]),
                        "maximum": "3",
                        "items": {"ids": [item]},
                    },
                    {"rule": "throughput", "sites": {}, "flow": "through", "maximum": "7"},
                ]
            )
            | {"id": "added"}
        )
    return replace(network, head={**network.head, "rules": rules})


def _other_thing(network: Network, rng: Random) -> Network:
    """Return the network with another item or site: step, weight, packs, roles or handling."""
    if rng.random() < 0.5:
        at = rng.randrange(len(network.items))
        item = network.items[at]
        changed = rng.choice(
            [
                replace(item, step=item.step * 2),
                replace(item, step=item.step / 2),
                replace(item, weight_kg=None),
                replace(item, packs=()),
                replace(item, unit="strange"),
            ]
        )
        return replace(network, items=(*network.items[:at], changed, *network.items[at + 1 :]))
    at = rng.randrange(len(network.sites))
    site = network.sites[at]
    other = rng.choice(
        [
            replace(site, roles=site.roles ^ {"cross_dock"} or frozenset({"ship_to"})),
            replace(site, handling_cost_any=None, handling_cost={}),
            replace(site, handling_cost_any=network.items[0].step, handling_cost={}),
        ]
    )
    return replace(network, sites=(*network.sites[:at], other, *network.sites[at + 1 :]))


MUTATIONS: tuple[Mutation, ...] = (
    flip_any_byte,
    cut_or_append,
    flip_entry_byte,
    flip_column_byte,
    change_head,
    move_entries,
    change_manifest,
    change_plan,
    change_certificate,
    change_history,
    change_numbers,
    change_numbers,
    exchange_names,
    change_rows,
    change_options,
    change_network,
    change_network,
)


def change_somewhere(document: Any, rng: Random) -> None:  # noqa: ANN401 - any JSON
    """Change one place of a document: another value, another key, or gone."""
    places = list(_places(document))
    if not places:
        return
    holder, key = rng.choice(places)
    choice = rng.randrange(5)
    if choice == 0:
        del holder[key]
    elif choice == 1 and isinstance(holder, dict):
        holder[rng.choice(["note", "zebra", "0"])] = holder.pop(key)
    elif choice == 2:
        deep: Any = holder[key]
        for _ in range(rng.choice([1, 40])):
            deep = [deep]
        holder[key] = deep
    else:
        holder[key] = rng.choice(STRANGE)


def _places(document: Any) -> list[tuple[Any, Any]]:  # noqa: ANN401 - any JSON
    """Return every place of a document, as the object or array that holds it, and its key."""
    places: list[tuple[Any, Any]] = []
    open_values = [document]
    while open_values:
        value = open_values.pop()
        keys = value if isinstance(value, dict) else range(len(value))
        for key in keys:
            places.append((value, key))
            if isinstance(value[key], dict | list):
                open_values.append(value[key])
    return places


def _is_number(value: object) -> bool:
    """Return whether a value is a number, or the text of one."""
    if isinstance(value, bool):
        return False
    if isinstance(value, int):
        return True
    digits = (
        value.replace("-", "").replace(".", "").replace("/", "") if isinstance(value, str) else ""
    )
    return digits.isdigit()


def _with_column(entries: Entries, name: str, data: bytes) -> Entries:
    """Return ``entries`` with another column, whose digest the head names."""
    head = json.loads(entries["network/head.json"])
    _, table, column = name.split("/")
    head["tables"][table]["columns"][column]["digest"] = sha256(data)
    return _with_head({**entries, name: data}, head)


def _with_head(entries: Entries, head: object) -> Entries:
    """Return ``entries`` with another head, whose digest the documents name."""
    data = _dumped(head)
    plan, certificate = (
        orjson.loads(entries["plan.json"]),
        orjson.loads(entries["certificate.json"]),
    )
    plan["network_digest"] = plan["certificate"]["network_digest"] = sha256(data)
    certificate["network_digest"] = sha256(data)
    return {
        **entries,
        "network/head.json": data,
        "plan.json": orjson.dumps(plan),
        "certificate.json": orjson.dumps(certificate),
    }


def _dumped(value: object) -> bytes:
    """Return compact JSON with sorted keys, also of what has no canonical form."""
    text = json.dumps(value, ensure_ascii=False, sort_keys=True, separators=(",", ":"))
    try:
        return text.encode()
    except UnicodeEncodeError:
        return json.dumps(value, sort_keys=True, separators=(",", ":")).encode()
