"""Whether numbers were written with a decimal comma: said, or shown beyond doubt, never guessed."""

from collections.abc import Iterable, Mapping
from dataclasses import replace

from service.network.faults import FaultList
from service.network.files.dialect import Dialect, decimal_evidence
from service.network.files.grids import Cells, Grid
from service.network.files.places import swapped
from service.network.files.table_columns import Kind


def with_decimal_points(
    grids: Mapping[str, Grid],
    separators: Mapping[str, str],
    dialect: Dialect,
    faults: FaultList,
) -> dict[str, Grid] | None:
    """Return grids whose numbers have a point, whatever mark they were sent with.

    Where commas separate cells, a point separates decimals. Elsewhere the sender says it, or the
    numbers of the file itself show it beyond doubt (another file may come from another program);
    else None, with a fault.
    """
    read: dict[str, Grid] = {}
    for name, grid in grids.items():
        mark = dialect.decimal_mark
        if mark is None:
            mark = "point" if separators[name] == "," else _shown_mark(grid, faults)
        if mark is not None:
            read[name] = _with_points(grid) if mark == "comma" else grid
    return read if len(read) == len(grids) else None


def _shown_mark(grid: Grid, faults: FaultList) -> str | None:
    """Return the mark that the numbers of a file show; None, with a fault, if they show none."""
    found = [decimal_evidence(cells.values) for cells in _numbers(grid)]
    comma, point, certain_comma, certain_point = (
        any(column[place] for column in found) for place in range(4)
    )
    if not comma and not point:
        return "point"
    if certain_comma == certain_point:
        place, value = _first(grid, ",.")
        detail = (
            "It cannot be told whether this mark parts decimals or thousands. Add a file "
            "dialect.csv with the column decimal_mark: point or comma. Thousands are never parted."
        )
        faults.add(place, "ambiguous_decimal_mark", detail, value)
        return None
    if certain_point:
        return "point"
    detail = (
        "The numbers show a decimal comma and were read so. A file dialect.csv with the column "
        "decimal_mark settles it."
    )
    faults.caution("decimal_comma_detected", detail, [_first(grid, ",")])
    return "comma"


def _numbers(grid: Grid) -> Iterable[Cells]:
    """Yield the columns of a grid that hold decimals."""
    return (cells for name, cells in grid.columns.items() if grid.kind(name) is Kind.NUMBER)


def _first(grid: Grid, marks: str) -> tuple[str, str]:
    """Return place and text of the first number with one of ``marks``; there is one."""
    return next(
        (grid.place(row=row, column=name), cell)
        for name, cells in grid.columns.items()
        if grid.kind(name) is Kind.NUMBER
        for row, cell in enumerate(cells.values)
        if isinstance(cell, str) and any(mark in cell for mark in marks)
    )


def _with_points(grid: Grid) -> Grid:
    """Return a grid whose numbers have their comma and point exchanged.

    What had a point, to part thousands, then has a comma and is refused like any such number.
    """
    columns = {
        name: replace(
            cells,
            values=[swapped(cell) if isinstance(cell, str) else cell for cell in cells.values],
        )
        if grid.kind(name) is Kind.NUMBER
        else cells
        for name, cells in grid.columns.items()
    }
    return replace(grid, columns=columns, decimal_comma=True)
