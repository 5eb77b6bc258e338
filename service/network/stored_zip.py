"""Zip files whose bytes depend on nothing but their entries, written and read by our own few lines.

Any zip tool opens them. Reading accepts exactly what writing produces (stored, sorted, one time
stamp, no extra fields), so that there is nothing to unpack, overlap, hide or repeat. Formats of the
records: PKWARE's APPNOTE.TXT, sections 4.3.7, 4.3.12 and 4.3.16.
"""

import struct
import zlib
from collections.abc import Mapping
from pathlib import Path

Octets = bytes | memoryview

# The format without its 64-bit extensions ends here.
FILE_BYTES_MAX = 2**32 - 1
ENTRIES_MAX = 2**16 - 1

_LOCAL = struct.Struct("<4s5H3I2H")
_CENTRAL = struct.Struct("<4s6H3I5H2I")
_END = struct.Struct("<4s4H2IH")
_VERSION = 20
_UNIX = 3 << 8
_MODE = 0o100644 << 16
# 1 January 1980 in the date format of zip: year 0, month 1, day 1.
_DATE = (1 << 5) | 1


class ZipFormError(ValueError):
    """The bytes are not a zip of the one form that is written here."""


def stored_zip(entries: Mapping[str, bytes]) -> bytes:
    """Return the zip of ``entries``, whose names are ASCII."""
    return b"".join(_pieces(entries))


def write_stored_zip(path: Path, entries: Mapping[str, Octets]) -> None:
    """Write the zip of ``entries`` to ``path``, without a copy of them."""
    pieces = _pieces(entries)
    with path.open("wb") as file:
        file.writelines(pieces)


def read_stored_zip(data: bytes) -> tuple[dict[str, bytes], tuple[str, ...]]:
    """Return the entries of a zip, and the names of those whose check sum is wrong.

    Raises ``ZipFormError`` for whatever ``stored_zip`` would have written differently.
    """
    entries, damaged = stored_entries(data)
    return {name: bytes(content) for name, content in entries.items()}, damaged


def stored_entries(data: bytes) -> tuple[dict[str, memoryview], tuple[str, ...]]:
    """Return what ``read_stored_zip`` does, the entries as views of ``data``."""
    whole = memoryview(data)
    entries: dict[str, memoryview] = {}
    damaged = []
    centrals = []
    former = b""
    place = 0
    while data[place : place + 4] == b"PK\x03\x04":
        start = place + _LOCAL.size
        if start > len(data):
            raise ZipFormError("an entry is cut off")
        *_, check_sum, size, _, length, _ = _LOCAL.unpack_from(data, place)
        name, content = data[start : start + length], whole[start + length : start + length + size]
        if data[place:start] + name != _local(name, check_sum, size) or len(content) != size:
            raise ZipFormError("an entry has a header of another form")
        if not name.isascii() or name <= former:
            raise ZipFormError("entries are not sorted and distinct")
        former = name
        centrals.append(_central(name, check_sum, size, place))
        entries[name.decode()] = content
        if zlib.crc32(content) != check_sum:
            damaged.append(name.decode())
        place = start + length + size
    directory = b"".join(centrals)
    if len(entries) > ENTRIES_MAX or len(data) > FILE_BYTES_MAX:
        raise ZipFormError("too much for one zip")
    if data[place:] != directory + _end(len(entries), len(directory), place):
        raise ZipFormError("the directory is not that of the entries")
    return entries, tuple(damaged)


def _pieces(entries: Mapping[str, Octets]) -> list[Octets]:
    """Return all parts of the zip of ``entries``, in order."""
    pieces: list[Octets] = []
    centrals: list[bytes] = []
    place = 0
    for name in sorted(entries):
        content = entries[name]
        check_sum, encoded = zlib.crc32(content), name.encode("ascii")
        local = _local(encoded, check_sum, len(content))
        pieces += (local, content)
        centrals.append(_central(encoded, check_sum, len(content), place))
        place += len(local) + len(content)
    directory = b"".join(centrals)
    if len(entries) > ENTRIES_MAX or place + len(directory) + _END.size > FILE_BYTES_MAX:
        raise ZipFormError("too much for one zip")
    return [*pieces, directory, _end(len(entries), len(directory), place)]


def _local(name: bytes, check_sum: int, size: int) -> bytes:
    """Return the header before the content of an entry."""
    header = (b"PK\x03\x04", _VERSION, 0, 0, 0, _DATE, check_sum, size, size, len(name), 0)
    return _LOCAL.pack(*header) + name


def _central(name: bytes, check_sum: int, size: int, place: int) -> bytes:
    """Return the record of an entry in the directory."""
    same = (_VERSION, 0, 0, 0, _DATE, check_sum, size, size, len(name))
    record = (b"PK\x01\x02", _UNIX | _VERSION, *same, 0, 0, 0, 0, _MODE, place)
    return _CENTRAL.pack(*record) + name


def _end(count: int, size: int, place: int) -> bytes:
    """Return the record that ends the file."""
    return _END.pack(b"PK\x05\x06", 0, 0, count, count, size, place, 0)
