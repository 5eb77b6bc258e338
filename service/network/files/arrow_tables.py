"""Parquet files and Arrow files as grids: columns go to NumPy without a Python object a row.

What a column of a float type holds was rounded before it came here, so it is refused; so is a
column of whole numbers where ids belong, which has lost their zeros in front.
"""

from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING, Final

from service.network.faults import FaultList
from service.network.files.arrow_numbers import exact_numbers, is_number
from service.network.files.arrow_texts import (
    date_cells,
    is_text,
    is_text_list,
    list_cells,
    moment_cells,
    text_cells,
    whole_cells,
)
from service.network.files.grids import Cells, Grid
from service.network.files.headers import headed, untransposed
from service.network.files.package import TableFile
from service.network.files.table_columns import Kind
from service.network.files.zips import HostileZipError, TooLargeError

if TYPE_CHECKING:
    import pyarrow as pa

# A few bytes can stand for any number of equal rows; more than this fit in no memory of a check.
ROWS_MAX: Final = 1 << 27
# What a column of another type is refused with, by what it holds.
_REFUSALS: Final = {
    Kind.NUMBER: "numbers; its type is {0}. Write decimal128, whole numbers, or text.",
    Kind.WHOLE: "whole numbers; its type is {0}. Write whole numbers, or text.",
    Kind.MOMENT: "points in time; its type is {0}. Write a timestamp with a time zone, or text "
    "such as 2026-02-03T16:00:00+01:00.",
    Kind.DATE: "dates; its type is {0}. Write date32, or text such as 2026-02-03.",
    Kind.LIST: "lists of texts; its type is {0}. Write lists of strings, or text with | between.",
    Kind.TEXT: "texts, zeros in front included; its type is {0}. Write it as strings.",
    Kind.PAIRS: "JSON objects as text; its type is {0}. Write it as strings.",
    Kind.OBJECTS: "JSON arrays as text; its type is {0}. Write it as strings.",
    Kind.FLAG: "true or false; its type is {0}. Write it as strings.",
}
_FLOAT: Final = (
    "A column of binary floats was rounded already. Write decimal128, whole numbers, or text."
)


def read_arrow(file: TableFile, faults: FaultList) -> Grid:
    """Return a Parquet or Arrow file as a grid whose first row is row 1.

    Raises ``HostileZipError`` where it cannot be read.
    """
    import pyarrow as pa  # noqa: PLC0415 - loads when such a file comes

    try:
        table = _parquet(file.path) if file.form == "parquet" else _arrow(file.path)
        # What the file says of its own buffers may be a lie; nothing is looked at before this.
        table.validate(full=True)
    except (MemoryError, TooLargeError):
        raise
    except (pa.ArrowException, OSError, ValueError) as error:
        form = "Parquet" if file.form == "parquet" else "Arrow (IPC) file"
        detail = f"{file.source} is no whole {form}: {str(error).splitlines()[0][:120]}"
        raise HostileZipError("broken_table", detail) from error
    grid = Grid(table=file.table, source=file.source, rows=table.num_rows, columns={}, first=1)
    _judge_rows(grid.rows)
    names = [str(name) for name in table.column_names]
    raw = headed(grid, names, [Cells(values=()) for _ in names], faults)
    columns: dict[str, Cells] = {}
    refused = set(raw.refused)
    for name in raw.columns:
        column = table.column(names.index(name))
        if pa.types.is_null(column.type):
            continue
        cells = _cells(raw, name, column, faults)
        if cells is None:
            refused.add(name)
        else:
            columns[name] = cells
    return untransposed(replace(raw, columns=columns, refused=frozenset(refused)), faults)


def _judge_rows(rows: int) -> None:
    """Refuse a table of more rows than are read."""
    if rows > ROWS_MAX:
        raise TooLargeError(f"A table has {rows} rows; at most {ROWS_MAX} are read.")


def _parquet(path: Path) -> "pa.Table":
    """Read the columns of a Parquet file, texts by their distinct values."""
    import pyarrow as pa  # noqa: PLC0415 - see the caller
    import pyarrow.parquet as pq  # noqa: PLC0415 - likewise

    with pq.ParquetFile(path, memory_map=True) as file:
        schema = file.schema_arrow
        _judge_rows(file.metadata.num_rows)
    texts = [field.name for field in schema if is_text(field.type)]
    with pq.ParquetFile(path, memory_map=True, read_dictionary=texts) as file:
        table = file.read(use_threads=False)
    assert isinstance(table, pa.Table)  # noqa: S101 - what the library says
    return table


def _arrow(path: Path) -> "pa.Table":
    """Map an Arrow file; its buffers are used where they lie."""
    import pyarrow as pa  # noqa: PLC0415 - see the caller

    with pa.memory_map(str(path)) as source, pa.ipc.open_file(source) as reader:
        return reader.read_all()


def _cells(grid: Grid, name: str, column: "pa.ChunkedArray", faults: FaultList) -> Cells | None:
    """Return a column as cells; None, with a fault, where its type cannot hold them."""
    import pyarrow as pa  # noqa: PLC0415 - see the caller

    kinds, form = pa.types, column.type
    kind = grid.kind(name) or Kind.TEXT
    if is_text(form):
        return text_cells(column)
    if kind is Kind.NUMBER and is_number(form):
        return Cells(values=exact_numbers(column))
    for fitting, fits, read in (
        (Kind.WHOLE, kinds.is_integer(form), whole_cells),
        (Kind.LIST, is_text_list(form), list_cells),
        (Kind.MOMENT, kinds.is_timestamp(form) and form.tz is not None, moment_cells),
        (Kind.DATE, kinds.is_date(form), date_cells),
        (Kind.DATE, kinds.is_timestamp(form) and form.tz is None, date_cells),
    ):
        if kind is fitting and fits:
            return read(column)
    place = grid.place(column=name)
    if kind is Kind.NUMBER and kinds.is_floating(form):
        faults.add(place, "float_column", _FLOAT, str(form))
    else:
        detail = f"This column holds {_REFUSALS[kind].format(form)}"
        faults.add(place, "wrong_column_type", detail, str(form))
    return None
