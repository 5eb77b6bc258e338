"""The input of a command, as the file and the types that the intake expects."""

import shutil
import sys
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

from service.doors.command_line.ending import EndingError, Exit

# What a file is, by the end of its name. A format that the intake does not read yet is refused
# there, by its name, so that both doors say the same.
_MEDIA_TYPES: Mapping[str, str] = {
    ".json": "application/json",
    ".csv": "text/csv",
    ".zip": "application/zip",
    ".xlsx": "application/vnd.openxmlformats-officedocument.spreadsheetml.sheet",
    ".parquet": "application/vnd.apache.parquet",
    ".arrow": "application/vnd.apache.arrow.file",
}
_ENCODINGS: Mapping[str, str] = {".gz": "gzip", ".zst": "zstd"}


@dataclass(frozen=True, slots=True, kw_only=True)
class Spooled:
    """An input on disk."""

    path: Path
    media_type: str
    content_encoding: str | None


def spooled(file: str, folder: Path) -> Spooled:
    """Return the input ``file`` as a path; standard input is written into ``folder`` first."""
    if file == "-":
        path = folder / "input"
        with path.open("wb") as target:
            shutil.copyfileobj(sys.stdin.buffer, target)
        return Spooled(path=path, media_type="application/json", content_encoding=None)
    path = Path(file)
    try:
        with path.open("rb"):
            pass
    except OSError as error:
        raise EndingError(
            Exit.BAD_INPUT, "unreadable", f"{file} cannot be read: {error.strerror}"
        ) from error
    encoding = _ENCODINGS.get(path.suffix.lower())
    name = path if encoding is None else path.with_suffix("")
    return Spooled(
        path=path,
        media_type=_MEDIA_TYPES.get(name.suffix.lower(), "application/json"),
        content_encoding=encoding,
    )
