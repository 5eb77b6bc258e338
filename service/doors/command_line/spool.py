"""The input of a command, as the file and the types that the intake expects."""

import shutil
import sys
import zipfile
import zlib
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Final

import zstandard

from service.doors.command_line.ending import EndingError, Exit
from service.network.files.media_types import ARROW, CSV, JSON, PARQUET, XLSX, content_type

# What a file is, by its first bytes. Its name is asked where they say nothing, so that a table that
# is no network by itself is refused for what it is, and not as bad JSON.
_MARKS: Final[Mapping[bytes, str]] = {b"PAR1": PARQUET, b"ARROW1": ARROW}
_ENDINGS: Final[Mapping[str, str]] = {".csv": CSV, ".xlsx": XLSX}
_PACKINGS: Final[Mapping[bytes, str]] = {b"\x1f\x8b": "gzip", b"\x28\xb5\x2f\xfd": "zstd"}
_PACKED_ENDINGS: Final[Mapping[str, str]] = {".gz": "gzip", ".zst": "zstd"}
_HEAD_BYTES: Final = 1 << 12
_ZIP_MARK: Final = b"PK\x03\x04"
# So that the same folder is the same zip, and has the same digest, whenever it is given.
_ZIP_MOMENT: Final = (1980, 1, 1, 0, 0, 0)
_ZIP_MODE: Final = 0o644 << 16


@dataclass(frozen=True, slots=True, kw_only=True)
class Spooled:
    """An input on disk."""

    path: Path
    media_type: str
    content_encoding: str | None


def spooled(file: str, folder: Path) -> Spooled:
    """Return the input ``file`` as a path.

    Standard input or a pipe is written into ``folder`` first, and so is a folder of tables, as a
    zip.
    """
    path = Path(file)
    try:
        if file == "-":
            path = folder / "input"
            with path.open("wb") as target:
                shutil.copyfileobj(sys.stdin.buffer, target)
        elif path.is_dir():
            return Spooled(
                path=_zipped(path, folder / "input.zip"),
                media_type="application/zip",
                content_encoding=None,
            )
        elif not path.is_file():
            # A pipe gives its bytes once, and they are looked at twice.
            piped, path = path, folder / "input"
            with piped.open("rb") as source, path.open("wb") as target:
                shutil.copyfileobj(source, target)
        return _told(path)
    except OSError as error:
        raise EndingError(
            Exit.BAD_INPUT, "unreadable", f"{file} cannot be read: {error.strerror}"
        ) from error


def _told(path: Path) -> Spooled:
    """Return a file with what its bytes, and where they say nothing its name, tell of it."""
    with path.open("rb") as source:
        head = source.read(_HEAD_BYTES)
    said = _PACKED_ENDINGS.get(path.suffix.lower())
    encoding = next((name for mark, name in _PACKINGS.items() if head.startswith(mark)), said)
    named = _ENDINGS.get((path.with_suffix("") if said else path).suffix.lower(), JSON)
    inner = head if encoding is None else _unpacked_head(head, encoding)
    if inner.startswith(_ZIP_MARK):
        # The directory that tells a workbook from a zip is at the end, out of reach when packed.
        kind = content_type(path) if encoding is None else "application/zip"
        kind = XLSX if named == XLSX else kind
    else:
        kind = next((kind for mark, kind in _MARKS.items() if inner.startswith(mark)), named)
    return Spooled(path=path, media_type=kind, content_encoding=encoding)


def _unpacked_head(head: bytes, encoding: str) -> bytes:
    """Return the first bytes of what is packed; none where the packing is damaged."""
    try:
        if encoding == "gzip":
            return zlib.decompressobj(31).decompress(head, _HEAD_BYTES)
        return zstandard.ZstdDecompressor().stream_reader(head).read(_HEAD_BYTES)
    except (zlib.error, zstandard.ZstdError):
        return b""


def _zipped(folder: Path, target: Path) -> Path:
    """Write the files of ``folder`` as a zip that depends on their names and bytes alone."""
    files = sorted(entry for entry in folder.rglob("*") if entry.is_file())
    try:
        with zipfile.ZipFile(target, "w", zipfile.ZIP_STORED, allowZip64=False) as archive:
            for file in files:
                entry = zipfile.ZipInfo(file.relative_to(folder).as_posix(), _ZIP_MOMENT)
                entry.external_attr = _ZIP_MODE
                entry.create_system = 3
                entry.file_size = file.stat().st_size
                with file.open("rb") as source, archive.open(entry, "w") as sink:
                    shutil.copyfileobj(source, sink, 1 << 20)
    except zipfile.LargeZipFile as error:
        detail = f"{folder} is larger than a network may be"
        raise EndingError(Exit.BAD_INPUT, "too_large", detail) from error
    return target
