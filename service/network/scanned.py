"""Columns that were read from JSON text by array operations, without one Python object a row.

They stand where the exact reader has a list, and say of every row what that list would hold: the
value as it was sent.
"""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from enum import Enum, auto
from typing import overload

import numpy as np

from service.network.columns import BoolArray, CodeArray, IdArray, IntArray
from service.network.files.json_digits import Digits
from service.network.quantities import ReadDecimals


class FieldKind(Enum):
    """What the values of a field are: numbers, texts of which many are equal, or different ids."""

    NUMBER = auto()
    TEXT = auto()
    ID = auto()


class Scanned(Sequence[object]):
    """One column; ``sent`` finds the value of a row in the text again."""

    def __init__(self, rows: int, sent: Callable[[int], object]) -> None:
        """Hold ``rows`` values."""
        self._rows = rows
        self._sent = sent

    def __len__(self) -> int:
        """Return the number of rows."""
        return self._rows

    @overload
    def __getitem__(self, row: int) -> object: ...

    @overload
    def __getitem__(self, row: slice) -> Sequence[object]: ...

    def __getitem__(self, row: int | slice) -> object:
        """Return the value of a row as the exact reader would; it is for the few that are shown."""
        if isinstance(row, slice):
            return [self._sent(place) for place in range(*row.indices(self._rows))]
        if not -self._rows <= row < self._rows:
            raise IndexError(row)
        return self._sent(row % self._rows)


class ScannedNumbers(Scanned):
    """A column of numbers and nulls. ``quoted`` tells that some were sent as text."""

    def __init__(self, digits: Digits, *, quoted: bool, sent: Callable[[int], object]) -> None:
        """Hold ``digits``, which fit into a column."""
        super().__init__(len(digits.values), sent)
        self.digits = digits
        self.quoted = quoted

    @property
    def null(self) -> BoolArray:
        """Return which rows are null."""
        return self.digits.null

    def read(self, decimals_max: int) -> ReadDecimals:
        """Return the column, numbers with more decimals than allowed left out."""
        digits, none = self.digits, np.zeros(0, dtype=np.int64)
        fine = none
        if digits.most_decimals > decimals_max:
            too_fine = digits.decimals > decimals_max
            digits, fine = digits.without(too_fine), np.flatnonzero(too_fine)
        return ReadDecimals(decimals=digits.column(), malformed=none, too_fine=fine, too_large=none)

    def small(self, most: int) -> tuple[CodeArray, Sequence[int]]:
        """Return whole numbers from 1 to ``most`` (0: null), and the rows with anything else."""
        digits = self.digits
        fits = (digits.values >= 1) & (digits.values <= most) & (digits.decimals == 0)
        wrong = np.flatnonzero(~fits & ~digits.null)
        return np.where(fits, digits.values, 0).astype(np.int32), wrong.tolist()


class ScannedTexts(Scanned):
    """A column of texts and nulls: ``distinct`` values, and for each row which of them it has."""

    def __init__(self, distinct: Sequence[str | None], codes: CodeArray) -> None:
        """Hold ``codes``, positions in ``distinct``."""
        super().__init__(len(codes), lambda row: distinct[int(codes[row])])
        self.distinct = distinct
        self.codes: IntArray = codes.astype(np.int64)


class ScannedIds(Scanned):
    """A column of ids and nulls, in UTF-8, ``b""`` where null."""

    def __init__(self, ids: IdArray, *, ascii_only: bool) -> None:
        """Hold ``ids``, none of which is empty or has a character below the space."""
        super().__init__(len(ids), lambda row: ids[row].decode() or None)
        self.ids = ids
        self.ascii_only = ascii_only


class ScannedGrid:
    """A table of numbers of ``height`` rows of ``width`` each, held row after row."""

    def __init__(self, numbers: ScannedNumbers, *, height: int, width: int) -> None:
        """Hold ``numbers``."""
        self.numbers = numbers
        self.height = height
        self.width = width

    def lists(self) -> list[list[object]]:
        """Return the table as the exact reader would, for one that stands where it should not."""
        values = list(self.numbers)
        return [
            values[start : start + self.width]
            for start in range(0, self.height * self.width, self.width)
        ]


@dataclass(frozen=True, slots=True, kw_only=True)
class ScannedRows:
    """An array of ``rows`` objects, as one column for each name that occurs in any of them.

    A row that lacks a name has null there, which means the same in every table.
    """

    rows: int
    columns: Mapping[str, Scanned]


def joined_numbers(parts: Sequence[Sequence[object] | None]) -> ScannedNumbers | None:
    """Return columns one after the other, where each is scanned or None, which counts as one null.

    The answer is None where they are not, or together do not fit into a column.
    """
    digits: list[Digits] = []
    columns: list[ScannedNumbers | None] = []
    for part in parts:
        if part is None:
            digits.append(Digits.room(0).spread(np.zeros(0, dtype=np.int64), 1))
            columns.append(None)
        elif isinstance(part, ScannedNumbers):
            digits.append(part.digits)
            columns.append(part)
        else:
            return None
    together = Digits.joined(digits)
    if not together.fits:
        return None
    ends = np.cumsum([len(part.values) for part in digits])

    def sent(position: int) -> object:
        number = int(np.searchsorted(ends, position, side="right"))
        column = columns[number]
        return (
            None if column is None else column[position - (int(ends[number - 1]) if number else 0)]
        )

    quoted = any(column.quoted for column in columns if column is not None)
    return ScannedNumbers(together, quoted=quoted, sent=sent)
