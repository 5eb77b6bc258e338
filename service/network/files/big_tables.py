"""Supply, demand and lanes of a file as the sheets that the readers of the big tables take."""

from collections.abc import Mapping, Sequence

import numpy as np

from service.network.columns import IntArray
from service.network.faults import FaultList, Odd, pointer
from service.network.files.grids import Cells, Grid, add_at_rows
from service.network.sheets import Column, Sheet

_KEEP = ("keep.quantity", "keep.priority")
_CODES_MAX = 2**62


def sheet_of_grid(grid: Grid, faults: FaultList) -> Sheet:
    """Return a grid of values as a sheet; families of columns become the field that they make."""
    columns = {name: cells for name, cells in grid.columns.items() if "." not in name}
    if any(name in grid.columns for name in _KEEP):
        columns["keep"] = _kept(grid)
    extra = _with_extra(grid, faults)
    if extra is not None:
        columns["extra"] = extra
    table = grid.table
    return Sheet(
        name=table,
        rows=grid.rows,
        columns={name: _column(table, name, cells) for name, cells in columns.items()},
        row_place=lambda row: pointer(table, row),
        refused=grid.refused,
    )


def _column(table: str, name: str, cells: Cells) -> Column:
    """Return cells as a column whose places are those of rows in the definition."""
    return Column(
        values=cells.values,
        take=cells.take,
        place=lambda row: pointer(table, row, name),
        by_rows=cells.take is not None,
        odd=cells.odd,
    )


def _kept(grid: Grid) -> Cells:
    """Return what stays in stock as one object a row."""
    values: list[object] = []
    parts = {name.partition(".")[2]: grid.columns[name] for name in _KEEP if name in grid.columns}
    for row in range(grid.rows):
        found = {name: cells.at(row) for name, cells in parts.items()}
        given = {name: value for name, value in found.items() if value is not None}
        values.append(given or None)
    return Cells(values=values)


def _with_extra(grid: Grid, faults: FaultList) -> Cells | None:
    """Return the pairs of all ``extra`` columns as one object a row, equal ones made once."""
    parts = {
        name.partition(".")[2]: cells
        for name, cells in grid.columns.items()
        if name.startswith("extra.")
    }
    objects = grid.columns.get("extra")
    if not parts:
        return objects
    if objects is None and all(
        cells.take is not None and not cells.odd for cells in parts.values()
    ):
        return _from_codes(parts, grid.rows)
    return _from_rows(grid, parts, objects, faults)


def _from_rows(
    grid: Grid, parts: Mapping[str, Cells], objects: Cells | None, faults: FaultList
) -> Cells:
    """Return pairs gathered row by row; a name that the object and a column say is a fault."""
    values: list[object] = []
    odd: dict[int, Odd] = {}
    doubled: dict[str, list[int]] = {}
    for row in range(grid.rows):
        found = {name: cells.at(row) for name, cells in parts.items()}
        given = {name: value for name, value in found.items() if value is not None}
        further = None if objects is None else objects.at(row)
        strange = [value for value in (*given.values(), further) if isinstance(value, Odd)]
        if strange:
            odd[row] = strange[0]
        if isinstance(further, dict):
            for name in sorted(set(further) & set(given)):
                doubled.setdefault(name, []).append(row)
            given |= further
        values.append(given if given and not strange else None)
    for name, rows in doubled.items():
        detail = "This pair stands in the column extra too. Keep one of them."
        add_at_rows(faults, grid, rows, f"extra.{name}", ("duplicate_name", detail))
    return Cells(values=values, odd=odd)


def _from_codes(parts: Mapping[str, Cells], rows: int) -> Cells:
    """Return pairs of columns that know which of their values are equal, by array operations."""
    key: IntArray = np.zeros(rows, dtype=np.int64)
    firsts: IntArray = np.zeros(min(rows, 1), dtype=np.int64)
    size = 1
    for cells in parts.values():
        assert cells.take is not None  # noqa: S101 - asked before the call
        width = max(1, len(cells.values))
        if size > _CODES_MAX // width:
            raise AssertionError("codes are renumbered after every column")
        key = key * width + cells.take
        _, firsts, key = np.unique(key, return_index=True, return_inverse=True)
        size = len(firsts)
    return Cells(values=_objects(parts, firsts), take=key)


def _objects(parts: Mapping[str, Cells], rows: IntArray) -> Sequence[object]:
    """Return the pairs of a few rows."""
    found = [
        {name: cells.at(row) for name, cells in parts.items() if cells.at(row) is not None}
        for row in rows.tolist()
    ]
    return [pairs or None for pairs in found]
