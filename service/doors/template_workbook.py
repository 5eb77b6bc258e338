"""The workbook to start from: a sheet for each table, its columns, notes, and a tiny example.

Every column of ids and texts is formatted as text before anybody types into it: that is how a
spreadsheet program keeps zeros in front.
"""

import datetime as dt
from collections.abc import Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

from service.doors.plan_workbook import formats_of, opened_workbook, put_row
from service.network.files.flat_tables import flat_tables
from service.network.files.table_columns import (
    FAMILIES,
    PAIR_COLUMNS,
    TABLES,
    Kind,
    field_of,
)
from service.network.files.workbook import NOTES_SHEET

if TYPE_CHECKING:
    from xlsxwriter.format import Format
    from xlsxwriter.workbook import Workbook

_CREATED: Final = dt.datetime(1980, 1, 1)  # noqa: DTZ001 - the library wants it without a zone
_INTRODUCTION: Final = """\
Replace the example by your own rows. Each sheet is a table, its first row names the columns.
A column may be left out where it is not needed, and so may the sheets packs, rules,
exchange_rates, tariffs, storage and control.
An empty cell says nothing. Keep columns of text formatted as text, or ids lose zeros in front.
Numbers have at most 3 decimals (quantities) or 6 (money, rates, weights); thousands are not parted.
This sheet is not read.
"""
EXAMPLE: Final[Mapping[str, Any]] = {
    "format": 1,
    "name": "Example",
    "currency": "EUR",
    "cut_off": "2026-02-03T16:00:00+01:00",
    "items": [
        {
            "id": "0025",
            "name": "Road salt, 25 kg bag",
            "unit": "bag",
            "weight_kg": "25.2",
            "packs": [{"unit": "pallet", "contains": "40"}],
        }
    ],
    "sites": [
        {"id": "DEP-NORTH", "roles": ["warehouse"], "name": "North depot", "handling_cost": "0.04"},
        {"id": "HUB", "roles": ["warehouse", "cross_dock"], "name": "Hub", "tags": ["coast"]},
        {"id": "YARD-07", "roles": ["ship_to"], "name": "Yard 7"},
    ],
    "supply": [
        {"site": "DEP-NORTH", "item": "0025", "quantity": "1200"},
        {"site": "HUB", "item": "0025", "quantity": "300", "keep": {"quantity": "50"}},
    ],
    "demand": [
        {
            "reference": "SO-10077/1",
            "order": "SO-10077",
            "site": "YARD-07",
            "item": "0025",
            "quantity": "880",
            "priority": "2",
            "extra": {"route": "R7"},
        }
    ],
    "lanes": [
        {"origin": "DEP-NORTH", "destination": "YARD-07", "unit_cost": "0.215", "capacity": "700"},
        {"origin": "DEP-NORTH", "destination": "HUB", "unit_cost": "0.11"},
        {"origin": "HUB", "destination": "YARD-07", "unit_cost": "0.16", "carrier": "C-ROAD"},
    ],
    "rules": [],
}


def write_template(path: Path) -> None:
    """Write the workbook to ``path``; it is a network that is accepted as it stands."""
    with opened_workbook(path) as workbook:
        workbook.set_properties({"title": "Network", "created": _CREATED})
        formats = formats_of(workbook)
        _write_notes(workbook, formats)
        for table, flat in flat_tables(EXAMPLE).items():
            used = [column for column in flat.columns if column not in TABLES[table]]
            columns = [*(name for name in TABLES[table] if name != "extra"), *used]
            rows = [dict(zip(flat.columns, row, strict=True)) for row in flat.rows]
            if table == "network":
                rows = [
                    dict(zip(PAIR_COLUMNS, (name, rows[0].get(name)), strict=True))
                    for name in columns
                ]
                columns = list(PAIR_COLUMNS)
            _write_sheet(workbook, table, columns, rows, formats)


def _write_sheet(
    workbook: "Workbook",
    table: str,
    columns: list[str],
    rows: list[dict[str, str | None]],
    formats: Mapping[str, "Format"],
) -> None:
    """Write one table with its example rows."""
    sheet = workbook.add_worksheet(table)
    numeric = []
    for place, column in enumerate(columns):
        field = field_of(table, column)
        is_number = field is not None and field.kind in {Kind.NUMBER, Kind.WHOLE}
        if is_number:
            numeric.append(place)
        sheet.set_column(
            place, place, max(12, len(column) + 2), None if is_number else formats["text"]
        )
    sheet.freeze_panes(1, 0)
    put_row(sheet, 0, columns, (), formats, header=True)
    for number, row in enumerate(rows, start=1):
        put_row(sheet, number, [row.get(column) for column in columns], numeric, formats)


def _write_notes(workbook: "Workbook", formats: Mapping[str, "Format"]) -> None:
    """Write what each column means."""
    sheet = workbook.add_worksheet(NOTES_SHEET)
    sheet.set_column(0, 1, 20)
    sheet.set_column(2, 2, 10)
    sheet.set_column(3, 3, 90)
    number = 0
    for line in _INTRODUCTION.splitlines():
        put_row(sheet, number, (line,), (), formats)
        number += 1
    put_row(
        sheet, number + 1, ("table", "column", "needed", "what it is"), (), formats, header=True
    )
    number += 2
    for table, fields in TABLES.items():
        for column, field in fields.items():
            need = "yes" if field.needed and table != "control" else ""
            put_row(sheet, number, (table, column, need or None, field.meaning), (), formats)
            number += 1
        for family, field in FAMILIES.items():
            if family in fields:
                put_row(sheet, number, (table, f"{family}. ...", None, field.meaning), (), formats)
                number += 1
