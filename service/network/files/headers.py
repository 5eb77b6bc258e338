"""The first row of a table: which column holds what; and tables that are written on their side."""

from collections import Counter
from collections.abc import Sequence
from dataclasses import replace

from service.network.faults import FaultList
from service.network.files.grids import Cells, Grid
from service.network.files.table_columns import (
    FAMILIES,
    PAIR_COLUMNS,
    SINGLE,
    field_of,
)
from service.network.sheets import refuse_field
from service.network.wording import ID_ADVICE, is_id


def headed(grid: Grid, header: Sequence[str], columns: Sequence[Cells], faults: FaultList) -> Grid:
    """Return ``grid`` with the columns that its header names; every other name is a fault."""
    kept: dict[str, Cells] = {}
    refused: set[str] = set()
    counts = Counter(header)
    on_its_side = grid.table in SINGLE and set(PAIR_COLUMNS) <= set(header)
    for position, (name, cells) in enumerate(zip(header, columns, strict=True), start=1):
        place = grid.place(column=name)
        if not name:
            if any(cells.at(row) is not None for row in range(grid.rows)):
                detail = f"Column {position} has values but no name in the first row."
                faults.add(grid.source, "unnamed_column", detail)
        elif counts[name] > 1:
            if name not in refused:
                detail = "Two columns have this name. Keep one of them."
                faults.add(place, "duplicate_column", detail, name)
            refused.add(name)
        elif on_its_side and name in PAIR_COLUMNS:
            kept[name] = cells
        elif on_its_side or field_of(grid.table, name) is None:
            refuse_field(grid.table, name, place, faults)
            refused.add(name)
        elif field_of(grid.table, name) is FAMILIES["extra"] and not is_id(name.partition(".")[2]):
            faults.add(place, "bad_id", ID_ADVICE, name)
            refused.add(name)
        else:
            kept[name] = cells
    return replace(grid, columns=kept, refused=frozenset(refused))


def untransposed(grid: Grid, faults: FaultList) -> Grid:
    """Return a table of one row that was written as field and value as that one row."""
    if grid.table not in SINGLE or set(grid.columns) != set(PAIR_COLUMNS):
        return grid
    names, values = (grid.columns[name] for name in PAIR_COLUMNS)
    columns: dict[str, Cells] = {}
    pairs: dict[str, int] = {}
    refused: set[str] = set()
    for row in range(grid.rows):
        name, value = names.at(row), values.at(row)
        place = grid.place(row=row, column=PAIR_COLUMNS[0])
        if type(name) is not str:
            faults.add(place, "missing_field", "Every row needs the name of a field.")
        elif name in pairs:
            faults.add(place, "duplicate_name", "This field is there twice. Keep one.", name)
        elif field_of(grid.table, name) is None:
            refuse_field(grid.table, name, place, faults)
            refused.add(name)
        else:
            pairs[name] = grid.number(row)
            columns[name] = Cells(values=[value])
    return replace(grid, rows=1, columns=columns, pairs=pairs, refused=frozenset(refused))
