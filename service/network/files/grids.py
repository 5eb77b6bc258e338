"""A table as a file or a sheet holds it: named columns, and the row in which each value stands."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Final

from service.network.columns import IntArray
from service.network.faults import FaultList, Odd
from service.network.files.table_columns import PAIR_COLUMNS, Kind, field_of

FAMILY_OF_PAIRS: Final = "extra."
# A report shows so many places of one kind of fault and counts the others.
SHOWN_MAX: Final = 100


@dataclass(frozen=True, slots=True, kw_only=True)
class Cells:
    """The cells of one column; ``take`` and ``odd`` as in ``sheets.Column``."""

    values: Sequence[object]
    take: IntArray | None = None
    odd: Mapping[int, Odd] = field(default_factory=dict)

    def at(self, row: int) -> object:
        """Return what stands in a row: a value, None, or an ``Odd``."""
        position = row if self.take is None else int(self.take[row])
        return self.odd.get(position, self.values[position])


@dataclass(frozen=True, slots=True, kw_only=True)
class Grid:
    """A table as it was sent.

    ``source`` names the file or the sheet. ``numbers`` are the row numbers that a person sees for
    rows 0, 1, ...; None: they go on from ``first``. ``columns`` hold cells, None where empty.
    ``pairs`` tells, for a table written as field and value, in which row each field stands.
    ``decimal_comma`` tells that its numbers were written with a comma.
    """

    table: str
    source: str
    rows: int
    columns: Mapping[str, Cells]
    first: int = 2
    numbers: IntArray | None = None
    pairs: Mapping[str, int] | None = None
    decimal_comma: bool = False
    refused: frozenset[str] = frozenset()

    def number(self, row: int) -> int:
        """Return the row number that a person sees."""
        return self.first + row if self.numbers is None else int(self.numbers[row])

    def place(self, *, row: int | None = None, column: str | None = None) -> str:
        """Return a place: ``FILE!row N,COLUMN``, ``FILE!row N``, ``FILE!column C`` or ``FILE``."""
        if self.pairs is not None and column is not None:
            if column in self.pairs:
                return f"{self.source}!row {self.pairs[column]},{PAIR_COLUMNS[1]}"
            return f"{self.source}!column {PAIR_COLUMNS[0]}"
        if row is None:
            return self.source if column is None else f"{self.source}!column {column}"
        place = f"{self.source}!row {self.number(row)}"
        return place if column is None else f"{place},{column}"

    def without_cells(self) -> "Grid":
        """Return what places need of a grid whose cells went elsewhere: its header and rows.

        The few columns of a family that make up one field keep theirs, to tell which is wrong.
        """
        nothing = Cells(values=())
        return replace(
            self,
            columns={
                name: cells if name.startswith(FAMILY_OF_PAIRS) else nothing
                for name, cells in self.columns.items()
            },
        )

    def kind(self, column: str) -> Kind | None:
        """Return what the cells of a column are, None where the table has no such column."""
        found = field_of(self.table, column)
        return None if found is None else found.kind


def add_at_rows(
    faults: FaultList, grid: Grid, rows: Sequence[int], column: str, advice: tuple[str, str]
) -> None:
    """Report cells in ``rows``: the first hundred with their place, the others as a number.

    ``advice`` is the code of the fault and what to do.
    """
    cells = grid.columns[column]
    for row in rows[:SHOWN_MAX]:
        faults.add(grid.place(row=row, column=column), *advice, cells.at(row))
    faults.add_uncounted(max(0, len(rows) - SHOWN_MAX))
