"""A zip of tables: which file holds which table, each unpacked within bounds.

A folder that is given to the command line comes as a zip too, so that there is one way in.
"""

import zipfile
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import BinaryIO, Final

from service.network.faults import FaultList
from service.network.files.places import DEFINITION_FILE
from service.network.files.table_columns import TABLES
from service.network.files.unpack import BrokenPackingError, unpacked_pieces
from service.network.files.zips import (
    BROKEN,
    Allowance,
    HostileZipError,
    contents,
    opened,
)

FORMS: Final[Mapping[str, str]] = {".csv": "csv", ".parquet": "parquet", ".arrow": "arrow"}
PACKINGS: Final[Mapping[str, str]] = {".gz": "gzip", ".zst": "zstd"}
DIALECT_FILE: Final = "dialect.csv"
# What a desktop adds to a folder and its zip by itself; it holds nothing of the sender's.
_DESKTOP_FOLDER: Final = "__MACOSX/"
_TABLE_FORMS: Final = frozenset(FORMS.values())
_ALONE: Final = frozenset({("network", "json"), ("dialect", "csv")})
_DESKTOP_FILES: Final = frozenset({".DS_Store", "Thumbs.db", "desktop.ini"})


@dataclass(frozen=True, slots=True, kw_only=True)
class TableFile:
    """One table as a file: ``source`` is its name as sent, ``path`` its unpacked bytes."""

    table: str
    form: str
    source: str
    path: Path


@dataclass(frozen=True, slots=True, kw_only=True)
class Package:
    """The files of one network. ``definition`` is ``network.json`` where there is one."""

    tables: Mapping[str, TableFile]
    definition: TableFile | None
    dialect: TableFile | None


def read_package(path: Path, folder: Path, allowance: Allowance, faults: FaultList) -> Package:
    """Unpack the tables in the zip at ``path`` into ``folder``.

    Raises ``HostileZipError`` and ``TooLargeError``; a file that is no table, or a second one for
    a table, is a fault.
    """
    with opened(path) as archive:
        found: dict[str, TableFile] = {}
        for entry, name in list(_named(archive, faults)):
            table, form, packing = _parted(name)
            if (table, form) not in _ALONE and (table not in TABLES or form not in _TABLE_FORMS):
                faults.add(name, "unknown_file", _ADVICE)
                continue
            # A definition may stand beside the table called network; nothing else may be twice.
            key = DEFINITION_FILE if form == "json" else table
            if key in found:
                detail = f"{found[key].source} holds the same already. Send one of them."
                faults.add(name, "duplicate_table", detail)
                continue
            target = folder / f"file-{len(found)}"
            _unpack(archive, entry, packing, target, allowance)
            found[key] = TableFile(table=table, form=form, source=name, path=target)
    definition = found.pop(DEFINITION_FILE, None)
    dialect = found.pop("dialect", None)
    return Package(tables=found, definition=definition, dialect=dialect)


_ADVICE: Final = (
    "No table of this name. Files are called TABLE.csv, TABLE.parquet or TABLE.arrow (packed: and "
    f".gz or .zst) for the tables {', '.join(TABLES)}; or {DEFINITION_FILE}, {DIALECT_FILE}."
)


def _named(archive: zipfile.ZipFile, faults: FaultList) -> Iterator[tuple[str, str]]:
    """Yield entries with their names inside the one folder that may be around them all."""
    names = [
        name
        for name in archive.namelist()
        if not name.endswith("/")
        and not name.startswith(_DESKTOP_FOLDER)
        and name.rpartition("/")[2] not in _DESKTOP_FILES
    ]
    folders = {name.partition("/")[0] for name in names}
    around = f"{next(iter(folders))}/" if len(folders) == 1 and "/" in names[0] else ""
    for name in sorted(names):
        inner = name.removeprefix(around)
        if "/" in inner:
            faults.add(
                name, "unknown_file", "Tables lie side by side, not in folders of their own."
            )
        else:
            yield name, inner


def _parted(name: str) -> tuple[str, str, str]:
    """Return table, form and packing that the name of a file says."""
    lower = name.lower()
    packing = ""
    for ending, encoding in PACKINGS.items():
        if lower.endswith(ending):
            lower, packing = lower.removesuffix(ending), encoding
    stem, point, ending = lower.rpartition(".")
    form = "json" if ending == "json" else FORMS.get(f"{point}{ending}", "")
    return stem, form, packing


def _unpack(
    archive: zipfile.ZipFile, entry: str, packing: str, target: Path, allowance: Allowance
) -> None:
    """Write an entry's bytes, unpacked once more where its name says so."""
    with contents(archive, entry) as source, target.open("wb") as file:
        for piece in _pieces(source, entry, packing):
            allowance.take(len(piece))
            file.write(piece)


def _pieces(source: BinaryIO, entry: str, packing: str) -> Iterator[bytes]:
    """Yield an entry's bytes; what goes wrong here is in the zip, and not on our disk."""
    unpacked = unpacked_pieces(source, packing)
    while True:
        try:
            piece = next(unpacked, None)
        except BrokenPackingError as error:
            detail = f"{entry[:80]} is not whole {packing}: it is damaged or ends too early."
            raise HostileZipError("broken_encoding", detail) from error
        except BROKEN as error:
            detail = f"The entry {entry[:80]!r} of the zip is damaged."
            raise HostileZipError("broken_zip", detail) from error
        if piece is None:
            return
        yield piece
