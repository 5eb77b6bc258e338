"""Networks written as files of every form, by the libraries that other programs use."""

import csv
import datetime as dt
import io
import json
import zipfile
from collections.abc import Callable, Mapping
from decimal import Decimal
from pathlib import Path
from typing import Any

import pyarrow as pa
import pyarrow.parquet as pq
import xlsxwriter

from service.doors.plan_workbook import is_exact_double
from service.network.files.flat_tables import FlatTable, flat_tables
from service.network.files.media_types import XLSX, ZIP
from service.network.files.table_columns import Kind, field_of
from service.network.intake import IntakeReport, Limits, intake
from service.network.options import Options

Writer = Callable[[str, FlatTable], bytes]


def zipped(files: Mapping[str, bytes]) -> bytes:
    """Return files as a zip."""
    target = io.BytesIO()
    with zipfile.ZipFile(target, "w", zipfile.ZIP_DEFLATED) as archive:
        for name, data in files.items():
            archive.writestr(name, data)
    return target.getvalue()


def with_part(book: bytes, name: str, content: bytes) -> bytes:
    """Return a workbook with another part in the place of one of its own."""
    with zipfile.ZipFile(io.BytesIO(book)) as archive:
        parts = {part: archive.read(part) for part in archive.namelist()}
    return zipped(parts | {name: content})


def csv_bytes(table: FlatTable, *, delimiter: str = ",") -> bytes:
    """Return a table as CSV."""
    text = io.StringIO(newline="")
    writer = csv.writer(text, delimiter=delimiter)
    writer.writerow(table.columns)
    writer.writerows(["" if cell is None else cell for cell in row] for row in table.rows)
    return text.getvalue().encode()


def arrow_table(table: FlatTable) -> pa.Table:
    """Return a table as Arrow columns of text."""
    cells = [[row[place] for row in table.rows] for place in range(len(table.columns))]
    return pa.table([pa.array(column, pa.string()) for column in cells], names=list(table.columns))


def parquet_bytes(table: FlatTable | pa.Table) -> bytes:
    """Return a table as Parquet."""
    target = io.BytesIO()
    pq.write_table(arrow_table(table) if isinstance(table, FlatTable) else table, target)
    return target.getvalue()


def arrow_bytes(table: FlatTable | pa.Table) -> bytes:
    """Return a table as an Arrow file."""
    target = io.BytesIO()
    data = arrow_table(table) if isinstance(table, FlatTable) else table
    with pa.ipc.new_file(target, data.schema) as writer:
        writer.write_table(data)
    return target.getvalue()


def workbook_bytes(tables: Mapping[str, FlatTable], *, typed: bool = False) -> bytes:
    """Return tables as a workbook of texts, or ``typed``: with numbers where a double is exact."""
    target = io.BytesIO()
    with xlsxwriter.Workbook(target, {"in_memory": True}) as workbook:
        for name, table in tables.items():
            sheet = workbook.add_worksheet(name)
            numeric = [is_numeric(name, column) for column in table.columns]
            for number, row in enumerate((table.columns, *table.rows)):
                for place, text in enumerate(row):
                    if text is None:
                        continue
                    if typed and number and numeric[place] and is_exact_double(text):
                        sheet.write_number(number, place, float(text))
                    else:
                        sheet.write_string(number, place, text)
    return target.getvalue()


def is_numeric(table: str, column: str) -> bool:
    """Return whether a column of a table holds numbers."""
    field = field_of(table, column)
    return field is not None and field.kind in {Kind.NUMBER, Kind.WHOLE}


def typed_arrow(name: str, table: FlatTable) -> pa.Table:
    """Return a table as Arrow columns of the types that a database would send.

    Numbers are decimals, small ones whole numbers, few texts a dictionary, lists lists.
    """
    columns = []
    for place, column in enumerate(table.columns):
        cells = [row[place] for row in table.rows]
        field = field_of(name, column)
        kind = None if field is None else field.kind
        texts = pa.array(cells, pa.string())
        if kind is Kind.NUMBER:
            columns.append(pa.array(map(_decimal, cells), pa.decimal128(38, 7)))
        elif kind is Kind.WHOLE:
            columns.append(texts.cast(pa.int32()))
        elif kind is Kind.LIST:
            lists = [None if cell is None else _elements(cell) for cell in cells]
            columns.append(pa.array(lists, pa.list_(pa.string())))
        elif kind is Kind.MOMENT and name != "network":
            columns.append(pa.array(map(_moment, cells), pa.timestamp("ns", "UTC")))
        elif kind is Kind.DATE:
            columns.append(texts.cast(pa.date32()))
        else:
            columns.append(texts.dictionary_encode())
    return pa.table(columns, names=list(table.columns))


def _decimal(text: str | None) -> Decimal | None:
    return None if text is None else Decimal(text)


def _moment(text: str | None) -> dt.datetime | None:
    return None if text is None else dt.datetime.fromisoformat(text)


def _elements(cell: str) -> list[str]:
    elements: list[str] = json.loads(cell) if cell.startswith("[") else cell.split("|")
    return elements


def network_zip(document: Mapping[str, Any], ending: str, writer: Writer) -> bytes:
    """Return a network as a zip of one file for each table."""
    tables = sent(document)
    return zipped({f"{name}{ending}": writer(name, table) for name, table in tables.items()})


def sent(document: Mapping[str, Any]) -> dict[str, FlatTable]:
    """Return the tables of a network that a sender would send."""
    tables = flat_tables(document)
    return {name: table for name, table in tables.items() if table.rows or name != "control"}


FORMS: Mapping[str, tuple[str, Callable[[Mapping[str, Any]], bytes]]] = {
    "csv": (ZIP, lambda document: network_zip(document, ".csv", lambda _, t: csv_bytes(t))),
    "parquet": (
        ZIP,
        lambda document: network_zip(document, ".parquet", lambda _, t: parquet_bytes(t)),
    ),
    "typed parquet": (
        ZIP,
        lambda document: network_zip(
            document, ".parquet", lambda name, t: parquet_bytes(typed_arrow(name, t))
        ),
    ),
    "arrow": (ZIP, lambda document: network_zip(document, ".arrow", lambda _, t: arrow_bytes(t))),
    "typed arrow": (
        ZIP,
        lambda document: network_zip(
            document, ".arrow", lambda name, t: arrow_bytes(typed_arrow(name, t))
        ),
    ),
    "workbook": (XLSX, lambda document: workbook_bytes(sent(document))),
    "typed workbook": (XLSX, lambda document: workbook_bytes(sent(document), typed=True)),
}


def take_in(
    body: bytes,
    folder: Path,
    *,
    media_type: str = ZIP,
    limits: Limits | None = None,
    options: Options | None = None,
) -> IntakeReport:
    """Check a body and leave what came of it in ``folder``."""
    spool, output = folder / "spool", folder / "output"
    spool.write_bytes(body)
    output.mkdir(exist_ok=True)
    return intake(
        spool,
        output,
        options=options or Options(),
        media_type=media_type,
        content_encoding=None,
        limits=limits or Limits(),
    )
