"""How a CSV file is written: letters, separator, decimal mark. What is not certain is a fault.

A wrong guess here would plan with other quantities than were meant, and nobody would see it.
"""

import csv
import re
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Final

from service.network.faults import FaultList
from service.network.files.table_columns import DIALECT, PAIR_COLUMNS, SINGLE, TABLES, field_of

SEPARATORS: Final = (",", ";", "\t")
ENCODINGS: Final = {"utf-8": "utf-8", "latin-1": "latin-1", "windows-1252": "cp1252"}
DECIMAL_MARKS: Final = ("point", "comma")
_BYTE_ORDER_MARK: Final = b"\xef\xbb\xbf"
_OTHER_MARKS: Final = (b"\xff\xfe", b"\xfe\xff")
# What Windows has where Latin-1 has control characters, which no text of a network may hold.
_WINDOWS_BYTES: Final = re.compile(rb"[\x80-\x9f]")
_SEPARATOR_LINE: Final = re.compile(r"sep=(.)(?:\r\n|\n|\r)")
# With three digits behind the mark and one to three before it, 1.234 may be a thousand and more.
_CERTAIN: Final = r"^-?(?:0|[1-9][0-9]{{3,}}){0}[0-9]+$|^-?[0-9]+{0}(?:[0-9]{{1,2}}|[0-9]{{4,}})$"
_CERTAIN_COMMA: Final = re.compile(_CERTAIN.format(","), re.MULTILINE)
_CERTAIN_POINT: Final = re.compile(_CERTAIN.format(r"\."), re.MULTILINE)
_ADVICE: Final = "Add a file dialect.csv with the column {0}: {1}."


@dataclass(frozen=True, slots=True, kw_only=True)
class Dialect:
    """What the sender says of the CSV files; None where it says nothing."""

    encoding: str | None = None
    decimal_mark: str | None = None


def decoded(data: bytes, source: str, dialect: Dialect, faults: FaultList) -> str | None:
    """Return the text of a file, or None with a fault where its letters are not known."""
    if data.startswith(_OTHER_MARKS):
        detail = "This is UTF-16. Save it as CSV UTF-8."
        faults.add(source, "not_utf8", detail)
        return None
    plain = data.removeprefix(_BYTE_ORDER_MARK)
    encoding = ENCODINGS[dialect.encoding] if dialect.encoding else "utf-8"
    if len(plain) < len(data):
        encoding = "utf-8"
    try:
        return plain.decode(encoding)
    except UnicodeDecodeError as error:
        first = error.start
    if dialect.encoding or len(plain) < len(data):
        detail = f"Not {dialect.encoding or 'utf-8'}: byte {first + 1} does not fit."
        faults.add(source, "not_utf8", detail)
        return None
    windows = _WINDOWS_BYTES.search(plain) is not None
    try:
        text = plain.decode("cp1252" if windows else "latin-1")
    except UnicodeDecodeError:
        advice = _ADVICE.format("encoding", ", ".join(ENCODINGS))
        detail = f"Not UTF-8: byte {first + 1} does not fit. Save it as UTF-8, or: {advice}"
        faults.add(source, "not_utf8", detail)
        return None
    name = "windows-1252" if windows else "latin-1"
    line = plain.count(b"\n", 0, first) + 1
    shown = text.split("\n")[line - 1].strip("\r")[:80]
    detail = (
        f"Not UTF-8, so read as {name}: see that the letters are right, or save it as UTF-8. "
        "dialect.csv with the column encoding settles it."
    )
    faults.caution("encoding_detected", detail, [(f"{source}!row {line}", shown)])
    return text


def separator(text: str, table: str, source: str, faults: FaultList) -> tuple[str, str] | None:
    """Return the separator of a file and its text without a line that names it.

    None, with a fault, where the header has no known column, or has some in two ways.
    """
    if said := _SEPARATOR_LINE.match(text):
        return said[1], text[said.end() :]
    found: dict[str, Sequence[str]] = {}
    for mark in SEPARATORS:
        header = _header(text, mark)
        if any(_known(table, name) for name in header):
            found[mark] = header
    if len(found) > 1:
        # One cell is the whole line: every separator finds it, and none parts it.
        parting = {mark: header for mark, header in found.items() if len(header) > 1}
        found = parting or {",": found[next(iter(found))]}
    if len(found) == 1:
        return next(iter(found)), text
    first = text.split("\n", 1)[0][:80]
    if not found:
        known = ", ".join(DIALECT if table == "dialect" else TABLES[table])
        detail = f"No column of {table} in the first row. Its columns are: {known}."
        faults.add(f"{source}!row 1", "unknown_header", detail, first)
    else:
        detail = "The first row can be parted in two ways. Use one of comma, semicolon and tab."
        faults.add(f"{source}!row 1", "ambiguous_separator", detail, first)
    return None


def decimal_evidence(cells: Iterable[object]) -> tuple[bool, bool, bool, bool]:
    """Return whether numbers have a comma, a point, certainly a decimal comma, a decimal point."""
    text = "\n".join(cell for cell in cells if isinstance(cell, str))
    comma, point = "," in text, "." in text
    return (
        comma,
        point,
        comma and _CERTAIN_COMMA.search(text) is not None,
        point and _CERTAIN_POINT.search(text) is not None,
    )


def _header(text: str, mark: str) -> Sequence[str]:
    """Return the first row as ``mark`` parts it; empty where it cannot be parted at all."""
    try:
        # The first row may be longer than a line, where a name is quoted.
        return next(csv.reader(text.splitlines(keepends=True)[:20], delimiter=mark), [])
    except csv.Error:
        return []


def _known(table: str, name: str) -> bool:
    """Return whether a name in a header is one of the table's."""
    return field_of(table, name) is not None or (table in SINGLE and name in PAIR_COLUMNS)
