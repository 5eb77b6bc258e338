"""Networks written as files of every form, by the libraries that other programs use."""

import csv
import io
import zipfile
from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Any

import openpyxl
import pyarrow as pa
import pyarrow.parquet as pq

from service.network.files.flat_tables import FlatTable, flat_tables
from service.network.files.media_types import XLSX, ZIP
from service.network.intake import IntakeReport, Limits, intake
from service.network.options import Options

Writer = Callable[[FlatTable], bytes]


def zipped(files: Mapping[str, bytes]) -> bytes:
    """Return files as a zip."""
    target = io.BytesIO()
    with zipfile.ZipFile(target, "w", zipfile.ZIP_DEFLATED) as archive:
        for name, data in files.items():
            archive.writestr(name, data)
    return target.getvalue()


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


def workbook_bytes(tables: Mapping[str, FlatTable]) -> bytes:
    """Return tables as a workbook whose cells are all texts."""
    workbook = openpyxl.Workbook()
    workbook.remove(workbook.active)
    for name, table in tables.items():
        sheet = workbook.create_sheet(name)
        for number, row in enumerate((table.columns, *table.rows), start=1):
            for place, text in enumerate(row, start=1):
                if text is not None:
                    cell = sheet.cell(number, place)
                    # Set by hand: the library would take "=" for a formula.
                    cell.value, cell.data_type = text, "s"
    target = io.BytesIO()
    workbook.save(target)
    return target.getvalue()


def network_zip(document: Mapping[str, Any], ending: str, writer: Writer) -> bytes:
    """Return a network as a zip of one file for each table."""
    return zipped({f"{name}{ending}": writer(table) for name, table in sent(document).items()})


def sent(document: Mapping[str, Any]) -> dict[str, FlatTable]:
    """Return the tables of a network that a sender would send."""
    tables = flat_tables(document)
    return {name: table for name, table in tables.items() if table.rows or name != "control"}


FORMS: Mapping[str, tuple[str, Callable[[Mapping[str, Any]], bytes]]] = {
    "csv": (ZIP, lambda document: network_zip(document, ".csv", csv_bytes)),
    "parquet": (ZIP, lambda document: network_zip(document, ".parquet", parquet_bytes)),
    "arrow": (ZIP, lambda document: network_zip(document, ".arrow", arrow_bytes)),
    "xlsx": (XLSX, lambda document: workbook_bytes(sent(document))),
}


def take_in(
    body: bytes,
    folder: Path,
    *,
    media_type: str = ZIP,
    limits: Limits | None = None,
    encoding: str | None = None,
    options: Options | None = None,
) -> IntakeReport:
    """Check a body and leave what came of it in ``folder``."""
    spool = folder / "spool"
    spool.write_bytes(body)
    output = folder / "output"
    output.mkdir(exist_ok=True)
    return intake(
        spool,
        output,
        options=options or Options(),
        media_type=media_type,
        content_encoding=encoding,
        limits=limits or Limits(),
    )
