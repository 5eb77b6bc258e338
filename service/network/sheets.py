"""A table in its one form: a column of values for each field, whatever form it was sent in.

Whatever the form, a value keeps the pointer to the place where it was sent, and a value that was
sent once for many rows is checked once.
"""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Final

import numpy as np

from service.network.columns import IntArray
from service.network.faults import FaultList, Odd
from service.network.not_yet import NOT_YET_FIELDS, refusal

# Positions travel as int32 in the columns.
ROWS_MAX: Final = 2**31 - 1


@dataclass(frozen=True, slots=True, kw_only=True)
class Column:
    """The values of one field. ``take`` tells which value each row has; None: its own, in order.

    ``place`` gives the pointer of the value at a position of ``values``. With ``by_rows`` it gives
    that of the value in a row: each row was sent with a value of its own, and ``take`` only says
    which of them are equal. ``odd`` holds what stood at positions whose value is None because no
    field could have it.
    """

    values: Sequence[object]
    take: IntArray | None
    place: Callable[[int], str]
    by_rows: bool = False
    odd: Mapping[int, Odd] = field(default_factory=dict)

    def position(self, row: int) -> int:
        """Return which value ``row`` has."""
        return row if self.take is None else int(self.take[row])

    def place_in(self, row: int) -> str:
        """Return the pointer of the value that ``row`` has."""
        return self.place(row if self.by_rows else self.position(row))

    def shown(self, position: int) -> object:
        """Return the value at ``position`` as it may be shown, an odd one too."""
        return self.odd.get(position, self.values[position])

    def rows_with(self, positions: IntArray, rows: int) -> IntArray:
        """Return the rows, ascending, that have one of the values at ``positions``."""
        if self.take is None:
            return positions
        marked = np.zeros(max(len(self.values), 1), dtype=np.bool_)
        marked[positions] = True
        return np.flatnonzero(marked[self.take]) if rows else np.zeros(0, dtype=np.int64)


def column_of_cells(cells: Sequence[object], *, place: Callable[[int], str]) -> Column:
    """Return cells, some of which may be odd, as a column of one value a row."""
    odd = {row: cell for row, cell in enumerate(cells) if isinstance(cell, Odd)}
    values = [None if row in odd else cell for row, cell in enumerate(cells)] if odd else cells
    return Column(values=values, take=None, place=place, odd=odd)


@dataclass(frozen=True, slots=True, kw_only=True)
class Sheet:
    """A table as sent: its name, the number of its rows, and a column for each field given.

    ``row_place`` points to a row, or to the value that stands for it. ``in_rows`` tells that each
    row was sent as an object, so that a field can be missing in one row and not in another.
    ``refused`` names the fields that were sent but are no columns, which is a fault by itself.
    """

    name: str
    rows: int
    columns: Mapping[str, Column]
    row_place: Callable[[int], str]
    in_rows: bool = False
    refused: frozenset[str] = frozenset()


def refuse_field(table: str, field: str, place: str, faults: FaultList) -> None:
    """Report a field that is not known, or not built yet."""
    subject = NOT_YET_FIELDS.get(table, {}).get(field)
    if subject is not None:
        faults.add(place, "not_yet", refusal(field, subject))
    else:
        faults.add(
            place, "unknown_field", f"There is no such field in {table}. Correct or drop it."
        )
