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
    numbers of all such files show it beyond doubt; else None, with a fault.
    """
    mark = dialect.decimal_mark
    undecided = {
        name: grid for name, grid in grids.items() if mark is not None or separators[name] != ","
    }
    if mark is None:
        comma = point = certain_comma = certain_point = False
        for grid in undecided.values():
            for cells in _numbers(grid):
                found = decimal_evidence(cells.values)
                comma, point = comma or found[0], point or found[1]
                certain_comma, certain_point = certain_comma or found[2], certain_point or found[3]
        if (comma or point) and certain_comma == certain_point:
            _refuse(undecided.values(), faults)
            return None
        if certain_comma:
            mark = "comma"
            detail = (
                "The numbers show a decimal comma and were read so. A file dialect.csv with the "
                "column decimal_mark settles it."
            )
            examples = [_first(grid, ",") for grid in undecided.values()]
            faults.caution(
                "decimal_comma_detected", detail, [found for found in examples if found is not None]
            )
    if mark != "comma":
        return dict(grids)
    return {name: _with_points(grid) if name in undecided else grid for name, grid in grids.items()}


def _numbers(grid: Grid) -> Iterable[Cells]:
    """Yield the columns of a grid that hold decimals."""
    return (cells for name, cells in grid.columns.items() if grid.kind(name) is Kind.NUMBER)


def _first(grid: Grid, marks: str) -> tuple[str, str] | None:
    """Return place and text of the first number with one of ``marks``."""
    for name, cells in grid.columns.items():
        if grid.kind(name) is not Kind.NUMBER:
            continue
        for row, cell in enumerate(cells.values):
            if isinstance(cell, str) and any(mark in cell for mark in marks):
                return grid.place(row=row, column=name), cell
    return None


def _refuse(grids: Iterable[Grid], faults: FaultList) -> None:
    """Report that the decimal mark cannot be told, once a file, at its first number with one."""
    detail = (
        "It cannot be told whether this mark parts decimals or thousands. Add a file dialect.csv "
        "with the column decimal_mark: point or comma. Thousands are never parted."
    )
    for grid in grids:
        found = _first(grid, ",.")
        if found is not None:
            faults.add(found[0], "ambiguous_decimal_mark", detail, found[1])


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
