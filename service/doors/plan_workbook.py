"""A plan as an XLSX workbook: summary, totals, and a sheet for each table, cells typed.

A cell that holds a number holds a binary double. An exact number of at most 15 digits survives
that, and comes back as it was; any other is written as text, so that no digit is lost. Texts are
never formulas, whatever they begin with. The same plan gives the same bytes.
"""

import datetime as dt
import errno
import re
from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

import orjson

from service.doors.plan_tables import AMOUNTS, COLUMNS, WHOLE, is_run, table_rows

if TYPE_CHECKING:
    from xlsxwriter.format import Format
    from xlsxwriter.workbook import Workbook
    from xlsxwriter.worksheet import Worksheet

ROWS_MAX: Final = 1_048_576
CELL_CHARACTERS_MAX: Final = 32_767
DIGITS_EXACT: Final = 15
_PLAIN: Final = re.compile(r"-?[0-9]+(?:\.[0-9]+)?")
# No moment of writing in the file: it would make two of the same plan differ.
_CREATED: Final = dt.datetime(1980, 1, 1)  # noqa: DTZ001 - the library wants it without a zone
_OPTIONS: Final = {
    "constant_memory": True,
    "strings_to_formulas": False,
    "strings_to_numbers": False,
    "strings_to_urls": False,
}
_SUMMARY: Final = (
    "status",
    "name",
    "currency",
    "cut_off",
    "release_by",
    "method",
    "total_cost",
    "total_cost_rounded",
    "rounding_difference",
    "network_digest",
    "options_digest",
)


def write_workbook(plan: Mapping[str, Any], path: Path) -> None:
    """Write ``plan`` as a workbook to ``path``; a long table goes on in further sheets."""
    with opened_workbook(path) as workbook:
        workbook.set_properties({"title": plan.get("name") or "Plan", "created": _CREATED})
        formats = formats_of(workbook)
        summary = workbook.add_worksheet("summary")
        summary.set_column(0, 0, 28)
        summary.set_column(1, 1, 80)
        put_row(summary, 0, ("field", "value"), (), formats, header=True)
        for number, (name, value) in enumerate(_summary(plan), start=1):
            put_row(summary, number, (name, value), (), formats)
        for table in ("totals", *(name for name in COLUMNS if name != "totals")):
            _write_table(workbook, table, table_rows(plan, table), formats)


@contextmanager
def opened_workbook(path: Path) -> Iterator["Workbook"]:
    """Write a workbook to ``path`` in the block; raise ``OSError`` where that cannot be."""
    from xlsxwriter.exceptions import XlsxFileError  # noqa: PLC0415 - see below
    from xlsxwriter.workbook import Workbook  # noqa: PLC0415 - loads when a workbook is written

    options = {**_OPTIONS, "tmpdir": str(path.parent)}
    try:
        with path.open("wb") as file, Workbook(file, options) as workbook:
            yield workbook
    except XlsxFileError as error:
        raise OSError(errno.EIO, str(error)) from error


def _summary(plan: Mapping[str, Any]) -> Iterator[tuple[str, Any]]:
    """Yield what is said of the plan as a whole."""
    for name in _SUMMARY:
        yield name, plan.get(name)
    for name, amount in (plan.get("cost_parts") or {}).items():
        yield f"cost_parts.{name}", amount
    for name, count in (plan.get("totals") or {}).items():
        if not isinstance(count, list):
            yield f"totals.{name}", str(count)
    certificate = plan.get("certificate") or {}
    for name in ("lower_bound", "gap", "lexicographic"):
        yield f"certificate.{name}", certificate.get(name)
    reason = plan.get("reason")
    if reason:
        yield "reason", reason["detail"]
    for warning in plan.get("warnings") or ():
        yield f"warnings.{warning['code']}", f"{warning['count']}: {warning['detail']}"


def _write_table(
    workbook: "Workbook",
    table: str,
    rows: Sequence[Mapping[str, Any]],
    formats: Mapping[str, "Format"],
) -> None:
    """Write the sheets of one table: at least one, with its header."""
    columns = COLUMNS[table]
    numeric = tuple(
        place for place, column in enumerate(columns) if column in AMOUNTS[table] or column in WHOLE
    )
    room = ROWS_MAX - 1
    for part in range(max(1, -(-len(rows) // room))):
        sheet = workbook.add_worksheet(table if part == 0 else f"{table} ({part + 1})")
        sheet.freeze_panes(1, 0)
        sheet.set_column(0, len(columns) - 1, 16)
        here = rows[part * room : (part + 1) * room]
        put_row(sheet, 0, columns, (), formats, header=True)
        for number, row in enumerate(here, start=1):
            put_row(sheet, number, [row.get(column) for column in columns], numeric, formats)
        sheet.autofilter(0, 0, len(here), len(columns) - 1)


def formats_of(workbook: "Workbook") -> Mapping[str, "Format"]:
    """Return how cells look: a header, texts, and texts that must not become formulas."""
    return {
        "header": workbook.add_format({"bold": True, "bottom": 1, "num_format": "@"}),
        "text": workbook.add_format({"num_format": "@"}),
        # What stands behind the apostrophe that a person would type; it is not shown.
        "quoted": workbook.add_format({"num_format": "@", "quote_prefix": True}),
    }


def put_row(  # noqa: PLR0913 - a row, where it goes and how it looks
    sheet: "Worksheet",
    number: int,
    values: Sequence[Any],
    numeric: Sequence[int],
    formats: Mapping[str, "Format"],
    *,
    header: bool = False,
) -> None:
    """Write a row of cells; the ``numeric`` places hold numbers where they are exact."""
    for place, value in enumerate(values):
        if value is None:
            continue
        if place in numeric and is_exact_double(str(value)):
            sheet.write_number(number, place, float(value))
            continue
        text = value if isinstance(value, str) else orjson.dumps(value).decode()
        if len(text) > CELL_CHARACTERS_MAX:
            text = f"{len(text)} characters: too long for a cell, see the plan as JSON"
        name = "header" if header else "quoted" if is_run(text) else "text"
        sheet.write_string(number, place, text, formats[name])


def is_exact_double(text: str) -> bool:
    """Return whether a cell's binary double leads back to exactly this decimal."""
    if not _PLAIN.fullmatch(text):
        return False
    return len(text.replace(".", "").strip("-0")) <= DIGITS_EXACT
