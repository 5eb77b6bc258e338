"""Files made to fool or to exhaust a verifier are refused by both, quickly and without a trace."""

import io
import struct
import time
import zipfile
from collections.abc import Callable
from pathlib import Path

import orjson
import pytest

from service.network.stored_zip import stored_zip
from tests.evidence.test_verifiers_agree import both_verdicts
from tests.evidence.zips import Entries, entries_of, good_zip, repacked, sha256


def _deflated(entries: Entries) -> bytes:
    """Return a compressed zip of the same entries, as any tool would write it."""
    buffer = io.BytesIO()
    with zipfile.ZipFile(buffer, "w", compression=zipfile.ZIP_DEFLATED) as archive:
        for name, content in entries.items():
            archive.writestr(name, content)
    return buffer.getvalue()


def _bomb() -> bytes:
    """Return a small zip that unpacks to a thousand times its size."""
    buffer = io.BytesIO()
    with (
        zipfile.ZipFile(buffer, "w", compression=zipfile.ZIP_DEFLATED) as archive,
        archive.open("plan.json", "w", force_zip64=True) as entry,
    ):
        for _ in range(128):
            entry.write(bytes(2**20))
    return buffer.getvalue()


def _twice(entries: Entries) -> bytes:
    """Return a zip with one name twice, which readers resolve differently."""
    # Our own writer takes each name once, so the last letter is changed afterwards.
    data = stored_zip({**entries, "plan.jsoo": b"{}"})
    return data.replace(b"plan.jsoo", b"plan.json")


def _huge_sizes(entries: Entries) -> bytes:
    """Return a zip whose first header claims four gigabytes."""
    data = bytearray(repacked(entries))
    struct.pack_into("<II", data, 18, 2**32 - 1, 2**32 - 1)
    return bytes(data)


HOSTILE: dict[str, Callable[[Entries], bytes]] = {
    "empty": lambda _: b"",
    "text": lambda _: b"PK" * 100,
    "compressed": _deflated,
    "bomb": lambda _: _bomb(),
    "doubled name": _twice,
    "huge sizes": _huge_sizes,
    "comment": lambda entries: repacked(entries)[:-2] + struct.pack("<H", 2) + b"hi",
    "behind": lambda entries: repacked(entries) + b"\0",
    "before": lambda entries: b"#!/bin/sh\n" + repacked(entries),
    "empty zip": lambda _: stored_zip({}),
    "no manifest": lambda entries: stored_zip(
        {name: data for name, data in entries.items() if name != "manifest.json"}
    ),
    "path upwards": lambda entries: stored_zip({**entries, "../manifest.json": b"{}"}),
}


@pytest.mark.parametrize("name", HOSTILE)
def test_hostile_file_is_refused(name: str, tmp_path: Path) -> None:
    """It takes no longer than reading the file, and nothing is unpacked."""
    data = HOSTILE[name](entries_of(good_zip(0)))
    began = time.monotonic()

    verdict, codes = both_verdicts(data, tmp_path)

    assert verdict in {"unreadable", "broken"}
    assert codes <= {"zip_unreadable", "manifest_malformed", "entry_unknown"}
    assert time.monotonic() - began < 5
    assert list(tmp_path.iterdir()) == [tmp_path / "evidence.zip"]


NASTY = {
    "deep arrays": b"[" * 100_000,
    "deep objects": b'{"a":' * 100_000,
    "balanced deep arrays": b"[" * 50_000 + b"]" * 50_000,
    "endless number": b"1" * 1_000_000,
    "not a number": b"NaN",
    "half a pair": b'"\\ud800"',
    "doubled key": b'{"format":1,"format":1}',
    "not text": b"\xff\xfe",
    "nothing": b"",
    "a list": b"[]",
    "null": b"null",
    "endless text": b'"' + b"\\" * 1_000_001,
}


@pytest.mark.parametrize("entry", ["plan.json", "certificate.json", "history.json", "options.json"])
@pytest.mark.parametrize("name", NASTY)
def test_nasty_json_is_malformed(name: str, entry: str, tmp_path: Path) -> None:
    """Digests follow, so that the content itself is looked at; one code names the document."""
    if (name, entry) == ("a list", "history.json"):
        name = "null"
    data = repacked({**entries_of(good_zip(0)), entry: NASTY[name]})
    began = time.monotonic()

    verdict, codes = both_verdicts(data, tmp_path)

    assert verdict == "broken"
    assert codes == {f"{entry.removesuffix('.json')}_malformed"}
    assert time.monotonic() - began < 5


@pytest.mark.parametrize("rows", [2**31 - 1, 2**31, 2**53 - 1])
@pytest.mark.parametrize("table", ["supply", "demand", "lanes"])
@pytest.mark.parametrize("columns", ["as they are", "none"])
def test_huge_counts_in_the_head_need_no_memory(
    rows: int, table: str, columns: str, tmp_path: Path
) -> None:
    """A table that claims billions of rows is refused by the length of its columns."""
    entries = entries_of(good_zip(0))
    head = orjson.loads(entries["network/head.json"])
    head["tables"][table]["rows"] = rows
    if columns == "none":
        head["tables"][table]["columns"] = {}
    entries["network/head.json"] = orjson.dumps(head, option=orjson.OPT_SORT_KEYS)

    verdict, codes = both_verdicts(repacked(entries), tmp_path)

    assert (verdict, codes) == ("broken", {"network_malformed"})


def test_huge_counts_in_a_column_need_no_memory(tmp_path: Path) -> None:
    """A column that claims billions of texts is refused before they are looked for."""
    entries = entries_of(good_zip(0))
    name = "network/lanes/measure"
    entries[name] = b"\xff\xff\xff\xff" + entries[name][4:]
    head = orjson.loads(entries["network/head.json"])
    head["tables"]["lanes"]["columns"]["measure"]["digest"] = sha256(entries[name])
    entries["network/head.json"] = orjson.dumps(head, option=orjson.OPT_SORT_KEYS)

    verdict, codes = both_verdicts(repacked(entries), tmp_path)

    assert (verdict, codes) == ("broken", {"network_malformed"})
