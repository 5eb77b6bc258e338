"""Ways to spoil evidence: bytes, documents, options, history and the network itself.

Each takes the entries of sound evidence and returns a zip. Where it makes the change worth looking
at, the digests that would give it away are put right, as a forger would do.
"""

import json
import re
from collections.abc import Callable
from datetime import date, timedelta
from random import Random
from typing import Any

import orjson

from tests.evidence.other_networks import change_network
from tests.evidence.zips import Entries, repacked, sha256, with_options

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
    """Add something small to one number, or date, of plan or certificate."""
    name = rng.choice(["plan.json", "certificate.json", "certificate.json"])
    document = orjson.loads(entries[name])
    places = [place for place in _places(document) if _is_number(place[0][place[1]])]
    if places:
        holder, key = rng.choice(places)
        value = holder[key]
        if isinstance(value, str) and re.fullmatch("[0-9]{4}-[0-9]{2}-[0-9]{2}", value):
            day = date.fromisoformat(value) + timedelta(days=rng.choice([-1, 1]))
            holder[key] = day.isoformat()
        elif isinstance(value, str):
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
