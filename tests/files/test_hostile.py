"""Files of strangers: bombs are cut off while they unpack, and lies are not believed."""

import gzip
import io
import struct
import zipfile
import zlib
from collections.abc import Callable
from pathlib import Path

import pyarrow as pa
import pytest
import zstandard

from service.network.faults import Status
from service.network.files import arrow_tables, workbook_guard, zips
from service.network.files.media_types import XLSX
from service.network.intake import Limits
from tests.files.reading import files, read, refused
from tests.files.test_workbook import workbook
from tests.files.writing import arrow_bytes, parquet_bytes, with_part, zipped

MEBIBYTE = 1 << 20
SMALL = Limits(unpacked_bytes_max=MEBIBYTE)


@pytest.mark.parametrize(
    "bomb",
    [
        lambda: {"lanes.csv": b" " * (2 * MEBIBYTE)},
        lambda: {"lanes.csv.gz": gzip.compress(b" " * (2 * MEBIBYTE))},
        lambda: {"lanes.csv.zst": zstandard.compress(b" " * (2 * MEBIBYTE))},
        lambda: {f"{name}.csv": b" " * (MEBIBYTE // 2) for name in ("lanes", "supply", "demand")},
    ],
)
def test_what_unpacks_to_too_much_is_cut_off(bomb: Callable[[], dict[str, bytes]]) -> None:
    """The limit holds for all files together, each of them unpacked twice or not."""
    body = zipped(bomb())
    assert len(body) < MEBIBYTE // 100

    assert refused(read(body, limits=SMALL)) == (Status.TOO_LARGE, "body_too_large")


def test_equal_rows_without_end_are_refused_by_their_number(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    """Some 200 bytes of Parquet stand for a million rows; the file says how many before any."""
    monkeypatch.setattr(arrow_tables, "ROWS_MAX", 999_999)
    table = pa.table({"origin": pa.array(["NORTH"] * 1_000_000).dictionary_encode()})

    for form, write in (("parquet", parquet_bytes), ("arrow", arrow_bytes)):
        report = read(files(lanes=None) | {f"lanes.{form}": write(table)})

        assert refused(report) == (Status.TOO_LARGE, "body_too_large")
        assert "1000000 rows" in report.faults[0].detail


def test_a_workbook_that_unpacks_to_too_much_is_cut_off() -> None:
    """Also in a part that no table is in: its reader would unpack that without counting."""
    for name in ("xl/worksheets/sheet1.xml", "xl/sharedStrings.xml", "xl/theme/theme1.xml"):
        body = with_part(workbook(), name, b" " * (2 * MEBIBYTE))

        assert refused(read(body, XLSX, limits=SMALL)) == (Status.TOO_LARGE, "body_too_large")


def test_the_size_that_a_zip_states_is_not_believed() -> None:
    """Stated 10 bytes, unpacked two mebibytes: neither more nor less than was stated is taken."""
    body = bytearray(zipped({"lanes.csv": b"x" * (2 * MEBIBYTE)}))
    stated = struct.pack("<L", 2 * MEBIBYTE)
    while (at := body.find(stated)) >= 0:
        body[at : at + 4] = struct.pack("<L", 10)

    assert refused(read(bytes(body), limits=SMALL)) == (Status.UNREADABLE, "broken_zip")


@pytest.mark.parametrize(
    "name",
    [
        "../lanes.csv",
        "/lanes.csv",
        "a/../../lanes.csv",
        "C:lanes.csv",
        "a\\lanes.csv",
        "lanes.csv\x00.txt",
    ],
)
def test_names_that_lead_elsewhere_are_refused(name: str) -> None:
    """No name of an entry ever becomes a path here; a zip that tries is nobody's network."""
    target = io.BytesIO()
    with zipfile.ZipFile(target, "w") as archive:
        archive.writestr("x" * len(name), b"id\n")
    body = target.getvalue().replace(b"x" * len(name), name.encode())

    assert refused(read(body)) == (Status.UNREADABLE, "bad_entry_name")


def test_an_entry_that_is_there_twice_is_refused() -> None:
    """Two programs would read two networks out of one zip."""
    body = zipped({"lanes.csv": b"a\n", "lanez.csv": b"b\n"}).replace(b"lanez", b"lanes")

    assert refused(read(body)) == (Status.UNREADABLE, "duplicate_entry")


def test_a_zip_of_very_many_entries_is_refused_by_its_end(tmp_path: Path) -> None:
    """Its directory is not read at all: that alone would take the memory of a network."""
    target = io.BytesIO()
    with zipfile.ZipFile(target, "w") as archive:
        for number in range(zips.ENTRIES_MAX + 1):
            archive.writestr(f"{number}", b"")
    path = tmp_path / "many.zip"
    path.write_bytes(target.getvalue())

    with pytest.raises(zips.HostileZipError) as caught:
        zips.opened(path)

    assert caught.value.code == "too_many_entries"


def end_of(body: bytes, **changed: int) -> bytes:
    """Return a zip with other numbers in the record at its end."""
    at = body.rfind(b"PK\x05\x06")
    names = ("mark", "disk", "disk_of_directory", "here", "in_all", "bytes", "offset", "comment")
    values = dict(zip(names, struct.unpack("<4s4H2LH", body[at:]), strict=True)) | changed
    return body[:at] + struct.pack("<4s4H2LH", *values.values())


@pytest.mark.parametrize(
    ("body", "code"),
    [
        (lambda: b"", "not_zip"),
        (lambda: b"PK\x03\x04 and no more", "not_zip"),
        (lambda: zipped(files())[:-30], "not_zip"),
        (lambda: end_of(zipped(files()), bytes=2 * MEBIBYTE), "too_many_entries"),
        (lambda: end_of(zipped(files()), disk=1), "unsupported_zip"),
        (lambda: end_of(zipped(files()), here=1), "unsupported_zip"),
        (lambda: end_of(zipped(files()), offset=7), "broken_zip"),
        (
            lambda: zipped(files()).replace(
                b"PK\x05\x06", b"PK\x06\x07" + bytes(16) + b"PK\x05\x06"
            ),
            "unsupported_zip",
        ),
        (lambda: zipped({"lanes.csv.gz": b"no gzip"}), "broken_encoding"),
        (lambda: zipped({"lanes.csv.zst": zstandard.compress(b"x" * 99)[:-3]}), "broken_encoding"),
        (lambda: zipped({"lanes.parquet": b"PAR1PAR1"}), "broken_table"),
        (lambda: zipped({"lanes.arrow": b"ARROW1"}), "broken_table"),
    ],
)
def test_what_is_not_whole_is_unreadable(body: Callable[[], bytes], code: str) -> None:
    """One fault that says so, and no traceback."""
    assert refused(read(body())) == (Status.UNREADABLE, code)


def test_encrypted_and_unusual_entries_are_refused() -> None:
    """What cannot be streamed within bounds is not unpacked at all."""
    encrypted = bytearray(zipped(files()))
    for mark, flags in ((b"PK\x03\x04", 6), (b"PK\x01\x02", 8)):
        at = encrypted.find(mark) + flags
        encrypted[at] |= 1
    target = io.BytesIO()
    with zipfile.ZipFile(target, "w", zipfile.ZIP_BZIP2) as archive:
        archive.writestr("lanes.csv", b"x")

    assert refused(read(bytes(encrypted))) == (Status.UNREADABLE, "encrypted_zip")
    assert refused(read(target.getvalue())) == (Status.UNREADABLE, "unsupported_zip")


def test_a_byte_that_was_changed_on_the_way_is_noticed() -> None:
    """A zip carries a check sum for each entry."""
    target = io.BytesIO()
    with zipfile.ZipFile(target, "w", zipfile.ZIP_STORED) as archive:
        for name, data in files().items():
            archive.writestr(name, data)
    body = target.getvalue().replace(b"NORTH,YARD,0.215", b"NORTH,YARD,9.215")

    assert refused(read(body)) == (Status.UNREADABLE, "broken_zip")


@pytest.mark.parametrize("form", ["parquet", "arrow"])
def test_damaged_columns_are_unreadable_or_read_as_they_are(form: str) -> None:
    """Whatever byte is wrong: a fault or a network, never a crash; offsets are not believed."""
    rows = 50
    table = pa.table(
        {
            "origin": pa.array(["NORTH"] * rows).dictionary_encode(),
            "destination": ["YARD"] * rows,
            "unit_cost": [f"{row}" for row in range(rows)],
        }
    )
    whole = parquet_bytes(table) if form == "parquet" else arrow_bytes(table)
    for place in range(4, len(whole) - 4, max(1, len(whole) // 40)):
        damaged = bytearray(whole)
        damaged[place] ^= 0xFF

        report = read(files(lanes=None) | {f"lanes.{form}": bytes(damaged)})

        assert report.status in {Status.ACCEPTED, Status.INVALID, Status.UNREADABLE}


def test_a_piece_without_the_end_of_a_cell_is_not_carried_for_ever() -> None:
    """What goes on for megabytes without one is not about cells."""
    piece = b" " * MEBIBYTE

    pieces = list(workbook_guard._whole_cells(iter([piece] * 12)))

    assert sum(map(len, pieces)) == 12 * MEBIBYTE
    assert max(map(len, pieces)) <= 5 * MEBIBYTE


def test_deflate_that_never_ends_is_an_error_and_not_a_loop() -> None:
    """An entry cut in the middle of its packed bytes."""
    packed = zlib.compress(b"id\n" * 10_000)
    body = zipped({"lanes.csv": b"id\n" * 10_000})
    at = body.find(packed[2:12])
    broken = body[:at] + bytes(20) + body[at + 20 :]

    assert refused(read(broken))[0] == Status.UNREADABLE
