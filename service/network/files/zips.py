"""Zips of strangers: their directory is judged before it is read, their contents are streamed.

A zip is a directory at the end of a file, and both can lie. The size of the directory and the
number of its entries are bounded first; what an entry really unpacks to is counted while it is
written, whatever the directory says.
"""

import struct
import zipfile
import zlib
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import BinaryIO, Final

ENTRIES_MAX: Final = 4096
DIRECTORY_BYTES_MAX: Final = 1 << 20
PIECE_BYTES: Final = 1 << 20
_END: Final = struct.Struct("<4s4H2LH")
_END_MARK: Final = b"PK\x05\x06"
_ZIP64_MARK: Final = b"PK\x06\x07"
_ZIP64_LOCATOR_BYTES: Final = 20
_COMMENT_BYTES_MAX: Final = (1 << 16) - 1
_ENCRYPTED: Final = 0x1
# All that Python's reader was seen to raise for a zip that is damaged: a place before the beginning
# of the file is an OSError, a name that is no text a ValueError.
BROKEN: Final = (
    zipfile.BadZipFile,
    zlib.error,
    struct.error,
    EOFError,
    NotImplementedError,
    OSError,
    RuntimeError,
    ValueError,
)
_METHODS: Final = frozenset({zipfile.ZIP_STORED, zipfile.ZIP_DEFLATED})


class HostileZipError(ValueError):
    """A zip cannot be read, or may not be; ``code`` says which, the text what to do."""

    def __init__(self, code: str, detail: str) -> None:
        """Keep the stable code beside the sentence for a person."""
        super().__init__(detail)
        self.code = code
        self.detail = detail


class TooLargeError(ValueError):
    """More came out than may be unpacked in all; the text says how much, if not the bytes."""


@dataclass(slots=True)
class Allowance:
    """How many bytes may still be unpacked, over all files of one body."""

    bytes_left: int

    def take(self, count: int) -> None:
        """Use up ``count`` bytes; raise ``TooLargeError`` when they are not there."""
        self.bytes_left -= count
        if self.bytes_left < 0:
            raise TooLargeError


def opened(path: Path) -> zipfile.ZipFile:
    """Open a zip whose directory is small and whose entries are plain.

    Raises ``HostileZipError``.
    """
    _judge_directory(path)
    try:
        archive = zipfile.ZipFile(path)
    except BROKEN as error:
        raise HostileZipError("not_zip", "This is not a whole zip file.") from error
    entries = archive.infolist()
    _judge_entries(entries)
    return archive


def contents(archive: zipfile.ZipFile, name: str) -> "BinaryIO":
    """Open an entry for reading; raise ``HostileZipError`` where its own header is broken."""
    try:
        return archive.open(name)  # type: ignore[return-value] # IO of bytes
    except BROKEN as error:
        raise _broken(name) from error


def pieces(archive: zipfile.ZipFile, name: str, allowance: Allowance) -> Iterator[bytes]:
    """Yield an entry's bytes, each counted against ``allowance``."""
    with contents(archive, name) as source:
        while True:
            try:
                piece = source.read(PIECE_BYTES)
            except BROKEN as error:
                raise _broken(name) from error
            if not piece:
                return
            allowance.take(len(piece))
            yield piece


def _broken(name: str) -> HostileZipError:
    return HostileZipError("broken_zip", f"The entry {name[:80]!r} of the zip is damaged.")


def _judge_directory(path: Path) -> None:
    """Refuse a directory that is missing, too large, or of the form for huge files."""
    size = path.stat().st_size
    tail_bytes = min(size, _END.size + _COMMENT_BYTES_MAX + _ZIP64_LOCATOR_BYTES)
    with path.open("rb") as file:
        file.seek(size - tail_bytes)
        tail = file.read()
    # The last record that fits its own comment is the one that readers take.
    at = tail.rfind(_END_MARK)
    while at >= 0:
        record = tail[at : at + _END.size]
        if len(record) == _END.size and at + _END.size + _END.unpack(record)[7] == len(tail):
            break
        at = tail.rfind(_END_MARK, 0, at)
    if at < 0:
        raise HostileZipError("not_zip", "This is not a whole zip file.")
    _, disk, _, here, in_all, directory_bytes, _, _ = _END.unpack(tail[at : at + _END.size])
    if _ZIP64_MARK in tail[max(0, at - _ZIP64_LOCATOR_BYTES) : at]:
        raise HostileZipError("unsupported_zip", "The zip is in the form for huge files (zip64).")
    if disk != 0 or here != in_all:
        raise HostileZipError("unsupported_zip", "The zip is one of several parts.")
    if in_all > ENTRIES_MAX or directory_bytes > DIRECTORY_BYTES_MAX:
        raise HostileZipError(
            "too_many_entries",
            f"The zip has {in_all} entries, their directory {directory_bytes} bytes; at most "
            f"{ENTRIES_MAX} and {DIRECTORY_BYTES_MAX}.",
        )


def _judge_entries(entries: Sequence[zipfile.ZipInfo]) -> None:
    """Refuse entries whose name leads elsewhere or occurs twice, or that cannot be streamed."""
    seen: set[str] = set()
    for entry in entries:
        name = entry.filename
        if name in seen:
            raise HostileZipError("duplicate_entry", f"The zip has {name[:80]!r} twice.")
        seen.add(name)
        # zipfile cuts a name at its first NUL; what stood behind it is in orig_filename.
        if (
            name.startswith("/")
            or "\\" in name
            or ".." in name.split("/")
            or (len(name) > 1 and name[1] == ":")
            or any(ord(letter) < 32 for letter in entry.orig_filename)
        ):
            raise HostileZipError("bad_entry_name", f"The zip has an entry named {name[:80]!r}.")
        if entry.flag_bits & _ENCRYPTED:
            raise HostileZipError("encrypted_zip", "The zip is encrypted. Send it in the clear.")
        if entry.compress_type not in _METHODS:
            raise HostileZipError(
                "unsupported_zip", f"The entry {name[:80]!r} is packed by an unusual method."
            )
