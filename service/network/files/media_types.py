"""The forms in which a whole network can be sent, by media type and by their first bytes."""

from pathlib import Path
from typing import Final

JSON: Final = "application/json"
ZIP: Final = "application/zip"
XLSX: Final = "application/vnd.openxmlformats-officedocument.spreadsheetml.sheet"
CSV: Final = "text/csv"
PARQUET: Final = "application/vnd.apache.parquet"
ARROW: Final = "application/vnd.apache.arrow.file"

NETWORK_TYPES: Final = (JSON, ZIP, XLSX)
# Forms of one table alone, which is no network; the refusal says what to send instead.
TABLE_TYPES: Final = (CSV, PARQUET, ARROW)

_ZIP_MARK: Final = b"PK\x03\x04"
# The name of the part that every workbook has, as it stands in the directory of its zip.
_WORKBOOK_PART: Final = b"xl/workbook.xml"
# Names stand at the end of a zip, after all contents; a workbook's are a few thousand bytes.
_DIRECTORY_BYTES: Final = 1 << 20


def accepted_type(header: str) -> str | None:
    """Return which form of a network a ``Content-Type`` names, None if it names none.

    A charset may be said of JSON alone, and only the one that it always has.
    """
    kind, *parameters = (part.strip().lower() for part in header.split(";"))
    said = [parameter for parameter in parameters if parameter]
    if kind == JSON:
        utf8 = {"charset=utf-8", 'charset="utf-8"'}
        return kind if set(said) <= utf8 else None
    return kind if kind in NETWORK_TYPES and not said else None


def refusal_of(header: str) -> str:
    """Return what to send instead of a form that is no network."""
    kind = header.partition(";")[0].strip().lower()
    if kind in TABLE_TYPES:
        return (
            "One file of this form holds one table, not a network. Put a file for each table "
            "into a zip and send it as application/zip."
        )
    return f"Send a network as one of: {', '.join(NETWORK_TYPES)}."


def content_type(path: Path) -> str:
    """Return the form of a network that was accepted, told by its bytes."""
    with path.open("rb") as file:
        if file.read(len(_ZIP_MARK)) != _ZIP_MARK:
            return JSON
        file.seek(max(0, path.stat().st_size - _DIRECTORY_BYTES))
        return XLSX if _WORKBOOK_PART in file.read() else ZIP


def content_type_of(data: bytes) -> str:
    """Return the form of a network that was accepted, told by its bytes."""
    if not data.startswith(_ZIP_MARK):
        return JSON
    return XLSX if _WORKBOOK_PART in data[-_DIRECTORY_BYTES:] else ZIP
