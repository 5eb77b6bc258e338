"""XLSX workbooks as grids: a sheet for each table, cells as texts and exact numbers.

A workbook holds numbers as binary doubles. One is accepted where its shortest decimal has at most
15 digits: then exactly one such decimal leads to it, the one that was typed.
"""

import datetime as dt
import re
from collections.abc import Mapping, Sequence
from decimal import Decimal
from pathlib import Path
from typing import Final
from xml.etree import ElementTree as ET

import numpy as np

from service.network.faults import FaultList, Odd
from service.network.files.grids import Cells, Grid
from service.network.files.headers import headed, untransposed
from service.network.files.json import Number
from service.network.files.table_columns import PAIR_COLUMNS, SINGLE, TABLES, Kind, field_of
from service.network.files.workbook_guard import OddCells, look_through
from service.network.files.zips import Allowance, HostileZipError, opened, pieces

DIGITS_EXACT: Final = 15
# A sheet for people, in the template and wherever they want one.
NOTES_SHEET: Final = "notes"
_WORKBOOK: Final = "xl/workbook.xml"
_RELATIONS: Final = "xl/_rels/workbook.xml.rels"
_PART_BYTES_MAX: Final = 1 << 20
_ZERO_IN_FRONT: Final = re.compile(r"0[0-9]+")
_INEXACT: Final = (
    "A cell with a number is certain of 15 digits; this has more. Round it in the sheet, or write "
    "it as text."
)
_NUMBER_FOR_TEXT: Final = (
    "A number stands where text belongs, and zeros in front of it may be lost. Format the column "
    "as text and enter it again."
)
_DATE_FOR_OTHER: Final = (
    "The program made a date of this cell. Format the column as text and enter it again."
)
_NO_OFFSET: Final = (
    "A date cell has no offset from UTC. Write text such as 2026-02-03T16:00:00+01:00."
)

Row = Sequence[object]


def read_workbook(path: Path, allowance: Allowance, faults: FaultList) -> dict[str, Grid]:
    """Return the tables of a workbook by name.

    Raises ``HostileZipError`` and ``TooLargeError``.
    """
    from python_calamine import (  # noqa: PLC0415 - loads when a workbook comes
        CalamineError,
        CalamineWorkbook,
    )

    parts = _parts(path)
    odd = look_through(path, allowance, parts.values())
    grids: dict[str, Grid] = {}
    try:
        with CalamineWorkbook.from_path(path) as workbook:
            for name in workbook.sheet_names:
                table = name.strip().lower()
                if table == NOTES_SHEET:
                    continue
                strange = odd.get(parts.get(name, ""), {})
                rows = _reaching(
                    workbook.get_sheet_by_name(name).to_python(skip_empty_area=False), strange
                )
                if not rows:
                    continue
                if table not in TABLES:
                    detail = f"No table of this name. Sheets are called: {', '.join(TABLES)}."
                    faults.add(name, "unknown_sheet", detail)
                elif table in grids:
                    faults.add(name, "duplicate_table", "Two sheets have this name.")
                else:
                    grids[table] = _grid(table, name, rows, strange, faults)
    except CalamineError as error:
        detail = "This is not a whole XLSX workbook."
        raise HostileZipError("broken_workbook", detail) from error
    return grids


def _parts(path: Path) -> Mapping[str, str]:
    """Return the part of the zip that each sheet is."""
    with opened(path) as archive:
        names = set(archive.namelist())
        if _WORKBOOK not in names or _RELATIONS not in names:
            raise HostileZipError("broken_workbook", "This is not a whole XLSX workbook.")
        texts = [
            b"".join(pieces(archive, name, Allowance(bytes_left=_PART_BYTES_MAX)))
            for name in (_WORKBOOK, _RELATIONS)
        ]
    try:
        workbook, relations = (ET.fromstring(text) for text in texts)  # noqa: S314 - expat bounds what entities may grow to
    except ET.ParseError as error:
        raise HostileZipError("broken_workbook", "This is not a whole XLSX workbook.") from error
    targets = {
        relation.get("Id"): relation.get("Target", "").removeprefix("/").removeprefix("xl/")
        for relation in relations
    }
    found = {}
    for sheet in workbook.iter():
        if sheet.tag.rpartition("}")[2] == "sheet":
            key = next((v for k, v in sheet.attrib.items() if k.rpartition("}")[2] == "id"), None)
            found[sheet.get("name", "")] = f"xl/{targets.get(key, '')}"
    return found


def _reaching(rows: Sequence[Row], odd: OddCells) -> Sequence[Row]:
    """Return rows that reach as far as the odd cells, which the reader takes for empty."""
    if not odd:
        return rows
    height = max([len(rows), *(row + 1 for row, _ in odd)])
    width = max([len(rows[0]) if rows else 0, *(column + 1 for _, column in odd)])
    reaching = [[*row] + [""] * (width - len(row)) for row in rows]
    return reaching + [[""] * width for _ in range(height - len(rows))]


def _grid(table: str, name: str, rows: Sequence[Row], odd: OddCells, faults: FaultList) -> Grid:
    """Return the rows of a sheet as a grid; empty ones are passed over."""
    header = [_name(cell) for cell in rows[0]]
    filled = {row for row, _ in odd}
    kept = [
        number
        for number, row in enumerate(rows)
        if number and (number in filled or row.count("") < len(row))
    ]
    grid = Grid(
        table=table,
        source=name,
        rows=len(kept),
        columns={},
        numbers=np.array(kept, dtype=np.int64) + 1,
    )
    reached = {number: place for place, number in enumerate(kept)}
    strange: dict[int, dict[int, Odd]] = {}
    for (row, column), cell in odd.items():
        if row:
            strange.setdefault(column, {})[reached[row]] = cell
    on_its_side = table in SINGLE and set(PAIR_COLUMNS) <= set(header)
    columns = []
    for position, column_name in enumerate(header):
        cells = [rows[number][position] for number in kept]
        kinds: Sequence[Kind]
        if on_its_side and column_name == PAIR_COLUMNS[1]:
            kinds = [
                _kind(table, str(rows[number][header.index(PAIR_COLUMNS[0])])) for number in kept
            ]
        else:
            kinds = [_kind(table, column_name)] * len(kept)
        columns.append(_cells(grid, column_name, cells, kinds, strange.get(position, {}), faults))
    return untransposed(headed(grid, header, columns, faults), faults)


def _name(cell: object) -> str:
    """Return a name in the header."""
    return cell if isinstance(cell, str) else _plain(cell) if isinstance(cell, float) else str(cell)


def _kind(table: str, column: str) -> Kind:
    """Return what a column holds; of unknown ones nothing is read."""
    field = field_of(table, column)
    return Kind.TEXT if field is None else field.kind


def _cells(  # noqa: PLR0913, PLR0917 - a column of a sheet and what is known of it
    grid: Grid,
    name: str,
    cells: Sequence[object],
    kinds: Sequence[Kind],
    strange: Mapping[int, Odd],
    faults: FaultList,
) -> Cells:
    """Return a column of a sheet as texts and exact numbers."""
    if not strange and set(map(type, cells)) == {str}:
        return Cells(values=[cell or None for cell in cells])
    values: list[object] = []
    odd = dict(strange)
    from_numbers: list[int] = []
    zero_in_front = False
    for row, (cell, kind) in enumerate(zip(cells, kinds, strict=True)):
        value: object
        if type(cell) is float and kind is Kind.NUMBER and len(repr(cell)) <= DIGITS_EXACT + 1:
            # Plain digits, a point, and so at most 15 of them: the usual number.
            digits = repr(cell).removesuffix(".0")
            value = Number(digits) if "e" not in digits else _value(cell, kind)
        elif isinstance(cell, str):
            value = cell or None
            zero_in_front = zero_in_front or _ZERO_IN_FRONT.fullmatch(cell) is not None
        else:
            value = _value(cell, kind)
            if isinstance(value, str) and kind in {Kind.TEXT, Kind.LIST}:
                from_numbers.append(row)
        if isinstance(value, Odd):
            odd[row] = value
            value = None
        values.append(value)
    if zero_in_front:
        # Where one id has a zero in front, a number has lost its own.
        for row in from_numbers:
            odd[row] = Odd("number_for_text", _NUMBER_FOR_TEXT, str(values[row]))
            values[row] = None
    elif from_numbers:
        detail = (
            "Numbers stand where text belongs; they were read as their digits. If there were zeros "
            "in front, format the column as text and enter them again."
        )
        examples = [(grid.place(row=row, column=name), values[row]) for row in from_numbers[:3]]
        faults.caution("number_read_as_text", detail, examples, len(from_numbers))
    return Cells(values=values, odd=odd)


def _value(cell: object, kind: Kind) -> object:
    """Return a cell that is no text as a value of its column, or as an ``Odd``."""
    if isinstance(cell, bool):
        return Odd("boolean_cell", "TRUE and FALSE are no values here.", str(cell).upper())
    if isinstance(cell, dt.datetime | dt.date | dt.time | dt.timedelta):
        return _date_value(cell, kind)
    assert isinstance(cell, int | float)  # noqa: S101 - the reader has no other kind
    text = _plain(float(cell))
    if len(text.replace(".", "").strip("-0")) > DIGITS_EXACT:
        return Odd("number_not_exact", _INEXACT, text)
    if kind in {Kind.NUMBER, Kind.WHOLE}:
        return Number(text)
    if kind in {Kind.TEXT, Kind.LIST} and text.isdigit():
        return text
    return Odd("number_for_text", _NUMBER_FOR_TEXT, text)


def _date_value(cell: dt.date | dt.time | dt.timedelta, kind: Kind) -> object:
    """Return a date as the text of a date, where a date belongs."""
    shown = cell.isoformat() if isinstance(cell, dt.date | dt.time) else str(cell)
    if kind is Kind.DATE and isinstance(cell, dt.date):
        if not isinstance(cell, dt.datetime):
            return shown
        if cell.time() == dt.time():
            return cell.date().isoformat()
    if kind is Kind.MOMENT:
        return Odd("bad_time", _NO_OFFSET, shown)
    return Odd("date_for_other", _DATE_FOR_OTHER, shown)


def _plain(number: float) -> str:
    """Return the shortest decimal that leads to a double, without an exponent."""
    text = format(Decimal(repr(number)), "f")
    if "." in text:
        text = text.rstrip("0").rstrip(".")
    return "0" if text == "-0" else text
