"""A column of numbers that came as whole numbers with one exponent, as Parquet and Arrow hold them.

It stands where a column of JSON has one text a row: the same checks, no Python object a row.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import overload

import numpy as np

from service.network.columns import BoolArray, IntArray
from service.network.files.json import Number
from service.network.quantities import SCALED_LIMIT, ReadDecimals, least_exponent


@dataclass(frozen=True, slots=True, kw_only=True)
class ExactNumbers(Sequence[object]):
    """The value of row r is ``values[r] / 10**exponent``; absent where ``present`` is False.

    ``exponent`` is at most 18. ``unheld`` are rows, ascending, whose number does not fit: they are
    absent, and either ``too_large`` or have more than six decimals.
    """

    values: IntArray
    present: BoolArray
    exponent: int
    too_fine: IntArray
    too_large: IntArray
    unheld: dict[int, str]

    def __len__(self) -> int:
        """Return the number of rows."""
        return len(self.values)

    @overload
    def __getitem__(self, row: int) -> object: ...

    @overload
    def __getitem__(self, row: slice) -> Sequence[object]: ...

    def __getitem__(self, row: int | slice) -> object:
        """Return the number of a row as its digits, None where it is absent."""
        if isinstance(row, slice):
            return [self[place] for place in range(*row.indices(len(self)))]
        if row in self.unheld:
            return Number(self.unheld[row])
        return self._digits(row) if self.present[row] else None

    def _digits(self, row: int) -> Number:
        """Return a number as plain decimal digits, without idle zeros."""
        value = int(self.values[row])
        digits = str(abs(value)).rjust(self.exponent + 1, "0")
        whole = digits[: len(digits) - self.exponent]
        tail = digits[len(digits) - self.exponent :].rstrip("0")
        return Number(("-" if value < 0 else "") + whole + ("." if tail else "") + tail)

    def read(self, decimals_max: int) -> ReadDecimals:
        """Return the column with at most so many decimals, and the rows that are faulty.

        Idle zeros count for nothing: the number of decimals is that of a whole column here.
        """
        values, exponent = self.values, self.exponent
        fine = np.zeros(len(values), dtype=np.bool_)
        if exponent > decimals_max:
            divisor = 10 ** (exponent - decimals_max)
            fine = values % divisor != 0
            values, exponent = np.where(fine, 0, values // divisor), decimals_max
        large = (values >= SCALED_LIMIT) | (values <= -SCALED_LIMIT)
        if bool((fine | large).any()):
            values = np.where(fine | large, 0, values)
        fine[self.too_fine] = True
        large[self.too_large] = True
        return ReadDecimals(
            decimals=least_exponent(values, self.present & ~fine & ~large, exponent),
            malformed=np.zeros(0, dtype=np.int64),
            too_fine=np.flatnonzero(fine),
            too_large=np.flatnonzero(large),
        )
