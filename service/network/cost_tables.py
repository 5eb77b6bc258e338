"""Cost tables of lanes: the ids once, a value for each pair; a cost of null is no lane at all.

In other members null is as good as absent: no limit, say.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from itertools import chain

import numpy as np

from service.network.columns import BoolArray, IntArray
from service.network.faults import FaultList, pointer
from service.network.scanned import Scanned, ScannedGrid, ScannedNumbers, joined_numbers
from service.network.sheets import ROWS_MAX, Column, Sheet, refuse_field


def cost_tables_sheet(
    tables: list[object],
    *,
    fields: Sequence[str],
    listed: frozenset[str],
    faults: FaultList,
) -> Sheet | None:
    """Return the lanes of several cost tables, one after the other."""
    sheets: list[Sheet] = []
    for number, table in enumerate(tables):
        if not isinstance(table, dict):
            detail = "Each element is a cost table, as the first is."
            faults.add(pointer("lanes", number), "wrong_type", detail, table)
            continue
        sheet = cost_table_sheet(
            ("lanes", number), table, fields=fields, listed=listed, faults=faults
        )
        if sheet is not None:
            sheets.append(sheet)
    if len(sheets) < len(tables):
        return None
    ends = np.cumsum([sheet.rows for sheet in sheets])
    given = [field for field in fields if any(field in sheet.columns for sheet in sheets)]
    return Sheet(
        name="lanes",
        rows=int(ends[-1]),
        columns={field: _joined(field, sheets) for field in given},
        row_place=lambda row: _part(sheets, ends, row),
        refused=frozenset().union(*(sheet.refused for sheet in sheets)),
    )


def _part(sheets: Sequence[Sheet], ends: IntArray, row: int) -> str:
    """Return the pointer of a row of several sheets."""
    number = int(np.searchsorted(ends, row, side="right"))
    return sheets[number].row_place(row - (int(ends[number - 1]) if number else 0))


def _joined(field: str, sheets: Sequence[Sheet]) -> Column:
    """Return one field of several sheets as one column; a sheet without it has no values."""
    parts = [sheet.columns.get(field) for sheet in sheets]
    # A sheet that lacks the field takes the one None that is put in its place.
    values = [part.values if part is not None else [None] for part in parts]
    starts = np.cumsum([0, *map(len, values)])
    takes: list[IntArray] = []
    for start, part, sheet in zip(starts.tolist(), parts, sheets, strict=False):
        if part is None:
            takes.append(np.full(sheet.rows, start, dtype=np.int64))
        elif part.take is None:
            takes.append(np.arange(start, start + sheet.rows, dtype=np.int64))
        else:
            takes.append(part.take + start)

    def place(position: int) -> str:
        number = int(np.searchsorted(starts, position, side="right")) - 1
        part = parts[number]
        if part is None:
            return sheets[number].row_place(0)
        return part.place(position - int(starts[number]))

    scanned = joined_numbers([None if part is None else part.values for part in parts])
    return Column(
        values=list(chain.from_iterable(values)) if scanned is None else scanned,
        take=np.concatenate(takes),
        place=place,
    )


def cost_table_sheet(
    path: tuple[str | int, ...],
    table: dict[str, object],
    *,
    fields: Sequence[str],
    listed: frozenset[str],
    faults: FaultList,
) -> Sheet | None:
    """Return the lanes of a cost table: every origin to every destination with a cost."""
    for end in ("origins", "destinations"):
        if not isinstance(table.get(end), list):
            detail = f"A cost table has {end}: an array of ids of sites."
            faults.add(pointer(*path, end), "wrong_type", detail, table.get(end))
            return None
    for field in table:
        if field in ("origin", "destination") or field not in (*fields, "origins", "destinations"):
            refuse_field("lanes", field, pointer(*path, field), faults)
    origins: list[object] = table["origins"]  # type: ignore[assignment] # checked above
    destinations: list[object] = table["destinations"]  # type: ignore[assignment] # likewise
    height, width = len(origins), len(destinations)
    if height * width > ROWS_MAX:
        faults.add(pointer(*path), "too_many_rows", f"At most {ROWS_MAX} lanes.")
        return None
    grids: dict[str, Column] = {}
    shaped = _Shape(path=path, height=height, width=width, faults=faults)
    for field in fields:
        if field in table and field not in ("origin", "destination"):
            column = shaped.column(field, table[field], listed=field in listed)
            if column is not None:
                grids[field] = column
    _refuse_repeats(path, "origins", origins, faults)
    _refuse_repeats(path, "destinations", destinations, faults)
    grids["origin"] = Column(
        values=origins,
        take=np.repeat(np.arange(height, dtype=np.int64), width),
        place=lambda position: pointer(*path, "origins", position),
    )
    grids["destination"] = Column(
        values=destinations,
        take=np.tile(np.arange(width, dtype=np.int64), height),
        place=lambda position: pointer(*path, "destinations", position),
    )
    sheet = _lanes_only(path, height * width, grids, faults)
    refused = {field for field in fields if table.get(field) is not None} - set(grids)
    return replace(sheet, refused=frozenset(refused))


def _lanes_only(
    path: tuple[str | int, ...], cells: int, grids: Mapping[str, Column], faults: FaultList
) -> Sheet:
    """Return a cost table without the cells that have no cost: there is no lane."""
    cost = grids.get("unit_cost")
    kept: IntArray | None = None
    if cost is not None and cost.take is None:
        no_lane = _absent(cost.values)
        if no_lane.any():
            kept = np.flatnonzero(~no_lane)
            _caution_values_without_lane(grids, no_lane, faults)

    def row_place(row: int) -> str:
        if cost is None:
            return pointer(*path)
        return cost.place(cost.position(row if kept is None else int(kept[row])))

    return Sheet(
        name="lanes",
        rows=cells if kept is None else len(kept),
        columns={
            field: column if kept is None else _thinned(column, kept)
            for field, column in grids.items()
        },
        row_place=row_place,
    )


def _thinned(column: Column, kept: IntArray) -> Column:
    """Return a column with only the rows of ``kept``."""
    take = kept if column.take is None else column.take[kept]
    return Column(values=column.values, take=take, place=column.place)


def _caution_values_without_lane(
    grids: Mapping[str, Column], no_lane: BoolArray, faults: FaultList
) -> None:
    """Say where a table of a further field has a value although the cell has no lane."""
    empty = np.flatnonzero(no_lane)
    for field, column in grids.items():
        if column.take is not None or field == "unit_cost":
            continue
        idle = empty[~_absent(column.values)[empty]]
        faults.caution(
            "value_without_lane",
            "The cell has no unit_cost, so there is no lane; its other values are not used.",
            [(column.place(cell), column.values[cell]) for cell in idle[:3].tolist()],
            len(idle),
        )


def _absent(values: Sequence[object]) -> BoolArray:
    """Return which values are null."""
    if isinstance(values, ScannedNumbers):
        return values.null
    if None not in values:
        return np.zeros(len(values), dtype=np.bool_)
    return np.fromiter((value is None for value in values), dtype=np.bool_, count=len(values))


def _refuse_repeats(
    path: tuple[str | int, ...], end: str, ids: Sequence[object], faults: FaultList
) -> None:
    """Report ids that stand twice along one side of a cost table."""
    seen: set[str] = set()
    for position, value in enumerate(ids):
        if isinstance(value, str):
            if value in seen:
                detail = "A cost table names each site once a side."
                faults.add(pointer(*path, end, position), "duplicate_value", detail, value)
            seen.add(value)


@dataclass(frozen=True, slots=True, kw_only=True)
class _Shape:
    """The shape of a cost table, against which its fields are read."""

    path: tuple[str | int, ...]
    height: int
    width: int
    faults: FaultList

    def column(self, field: str, value: object, *, listed: bool) -> Column | None:
        """Return a field sent as a table of the shape, or as one value for all cells."""
        cells = self.height * self.width

        def place(cell: int) -> str:
            return pointer(*self.path, field, cell // self.width, cell % self.width)

        if isinstance(value, ScannedGrid):
            if (value.height, value.width) == (self.height, self.width):
                return Column(values=value.numbers, take=None, place=place)
            value = value.lists()
        elif isinstance(value, Scanned):
            value = list(value)
        is_table = isinstance(value, list) and not (
            listed and not any(isinstance(element, list) for element in value)
        )
        if not is_table:
            if field == "unit_cost" and value is None:
                return None
            return Column(
                values=[value],
                take=np.zeros(cells, dtype=np.int64),
                place=lambda _: pointer(*self.path, field),
            )
        rows: list[object] = value  # type: ignore[assignment] # is_table says so
        if not self._fits(field, rows):
            return None
        return Column(
            values=list(chain.from_iterable(rows)),  # type: ignore[arg-type] # all are lists: _fits
            take=None,
            place=place,
        )

    def _fits(self, field: str, rows: list[object]) -> bool:
        """Return whether a table has the shape; report where it has not."""
        if len(rows) != self.height:
            detail = f"Send one row for each of the {self.height} origins; these are {len(rows)}."
            self.faults.add(pointer(*self.path, field), "wrong_shape", detail)
            return False
        wrong = [
            place
            for place, row in enumerate(rows)
            if not isinstance(row, list) or len(row) != self.width
        ]
        detail = f"Send an array with one value for each of the {self.width} destinations."
        for place in wrong[:100]:
            self.faults.add(pointer(*self.path, field, place), "wrong_shape", detail)
        self.faults.add_uncounted(len(wrong) - len(wrong[:100]))
        return not wrong
