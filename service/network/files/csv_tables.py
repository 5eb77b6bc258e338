"""CSV files (RFC 4180) as grids of text; an empty cell is none."""

import csv
import io
from collections.abc import Mapping, Sequence

import numpy as np

from service.network.faults import FaultList
from service.network.files.dialect import (
    DECIMAL_MARKS,
    ENCODINGS,
    Dialect,
    decoded,
    separator,
)
from service.network.files.grids import SHOWN_MAX, Cells, Grid
from service.network.files.headers import headed, untransposed
from service.network.files.package import TableFile


def read_dialect(file: TableFile | None, faults: FaultList) -> Dialect:
    """Read what the sender says of the CSV files."""
    if file is None:
        return Dialect()
    found = read_csv(file, Dialect(), faults)
    if found is None:
        return Dialect()
    grid, _ = found
    said: dict[str, str | None] = {"encoding": None, "decimal_mark": None}
    choices: Mapping[str, Sequence[str]] = {
        "encoding": tuple(ENCODINGS),
        "decimal_mark": DECIMAL_MARKS,
    }
    if grid.rows > 1:
        faults.add(grid.place(row=1), "too_many_rows", "One row says it all.")
    for name, column in grid.columns.items():
        value = column.at(0) if grid.rows else None
        if value is None or name not in choices:
            continue
        if value in choices[name]:
            said[name] = str(value)
        else:
            place = grid.place(row=0, column=name)
            faults.add(place, "bad_choice", f"Say one of: {', '.join(choices[name])}.", value)
    return Dialect(**said)


def read_csv(file: TableFile, dialect: Dialect, faults: FaultList) -> tuple[Grid, str] | None:
    """Return a file as a grid of texts, and its separator; None where it cannot be read."""
    text = decoded(file.path.read_bytes(), file.source, dialect, faults)
    if text is None:
        return None
    if not text.strip():
        faults.add(file.source, "empty_file", "There is not even a header in the first row.")
        return None
    parted = separator(text, file.table, file.source, faults)
    if parted is None:
        return None
    mark, body = parted
    first = 1 if body is text else 2
    reader = csv.reader(io.StringIO(body, newline=""), delimiter=mark, strict=True)
    try:
        rows = list(reader)
    except csv.Error as error:
        detail = f"Not CSV, at line {reader.line_num + first - 1}: {error}."
        faults.add(file.source, "broken_csv", detail)
        return None
    return _grid(file, rows, first, faults), mark


def _grid(file: TableFile, rows: list[list[str]], first: int, faults: FaultList) -> Grid:
    """Return rows of cells as a grid; empty rows are passed over, uneven ones are faults."""
    header, *body = rows
    width = len(header)
    numbers = None
    if not all(map(any, body)):
        kept = [number for number, row in enumerate(body) if any(row)]
        numbers = np.array(kept, dtype=np.int64) + first + 1
        body = [body[number] for number in kept]
    uneven = [number for number, row in enumerate(body) if len(row) != width]
    for number in uneven:
        row = body[number]
        if len(row) > width and not any(row[width:]):
            body[number] = row[:width]
    uneven = [number for number in uneven if len(body[number]) != width]
    grid = Grid(
        table=file.table,
        source=file.source,
        rows=len(body),
        columns={},
        first=first + 1,
        numbers=numbers,
    )
    for number in uneven[:SHOWN_MAX]:
        detail = f"This row has {len(body[number])} cells, the header {width}. Is a quote missing?"
        faults.add(grid.place(row=number), "uneven_row", detail)
    faults.add_uncounted(max(0, len(uneven) - SHOWN_MAX))
    for number in uneven:
        body[number] = (body[number] + [""] * width)[:width]
    cells = list(zip(*body, strict=True)) or [()] * width
    columns = [Cells(values=_with_gaps(column)) for column in cells]
    return untransposed(headed(grid, header, columns, faults), faults)


def _with_gaps(cells: Sequence[str]) -> Sequence[str | None]:
    """Return cells with None where they are empty."""
    return [cell or None for cell in cells] if "" in cells else cells
