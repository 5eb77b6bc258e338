"""Columns of exact rationals, and the one factor that turns the money of a run into integers."""

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np

from service.network.columns import BoolArray, CodeArray, IntArray
from service.planning.model.arcs import SAFE, MoneyArray, largest
from service.planning.model.limits import NumbersTooLargeError


@dataclass(frozen=True, slots=True, kw_only=True)
class Rationals:
    """A column of exact rationals: row r is ``values[r] * multipliers[codes[r]]``.

    ``values`` are int64 or Python ints, shape (rows,); ``codes`` int32, shape (rows,). There are
    few multipliers: one for each unit or measure of a table.
    """

    values: MoneyArray
    codes: CodeArray
    multipliers: tuple[Fraction, ...]

    @staticmethod
    def of(values: MoneyArray, multiplier: Fraction) -> "Rationals":
        """Return ``values`` times one multiplier."""
        codes = np.broadcast_to(np.int32(0), values.shape)
        return Rationals(values=values, codes=codes, multipliers=(multiplier,))

    @staticmethod
    def zeros(rows: int) -> "Rationals":
        """Return ``rows`` zeros."""
        return Rationals.of(np.zeros(rows, np.int64), Fraction(1))

    @staticmethod
    def given(fractions: Sequence[Fraction]) -> "Rationals":
        """Return a few numbers as a column."""
        below = math.lcm(1, *(value.denominator for value in fractions))
        whole = [value.numerator * (below // value.denominator) for value in fractions]
        fits = all(abs(value) < SAFE for value in whole)
        kind: Any = np.int64 if fits else object
        return Rationals.of(np.array(whole, kind), Fraction(1, below))

    def at(self, rows: IntArray) -> "Rationals":
        """Return some rows."""
        return Rationals(
            values=self.values[rows], codes=self.codes[rows], multipliers=self.multipliers
        )

    def plus(self, other: "Rationals") -> "Rationals":
        """Return the sum, row by row."""
        grid = common_grid((self.grid(), other.grid())) or Fraction(1)
        first, second = self.on(grid), other.on(grid)
        if largest(first) + largest(second) >= SAFE:
            first, second = first.astype(object), second.astype(object)
        return Rationals.of(first + second, grid)

    def times(self, factor: Fraction) -> "Rationals":
        """Return every value times ``factor``."""
        return Rationals(
            values=self.values,
            codes=self.codes,
            multipliers=tuple(factor * own for own in self.multipliers),
        )

    def fraction(self, row: int) -> Fraction:
        """Return the value of one row."""
        return int(self.values[row]) * self.multipliers[int(self.codes[row])]

    def equals(self, whole: IntArray) -> BoolArray:
        """Return where the value is the whole number given."""
        result = np.zeros(self.values.shape[0], np.bool_)
        for multiplier, rows in self._by_multiplier():
            values, numbers = self.values[rows], whole[rows]
            above, below = multiplier.numerator, multiplier.denominator
            if max(largest(values) * abs(above), largest(numbers) * below) >= SAFE:
                values, numbers = values.astype(object), numbers.astype(object)
            result[rows] = values * above == numbers * below
        return result

    def grid(self) -> Fraction:
        """Return the largest number of which every value is a whole multiple; 0 if all are 0."""
        return common_grid(
            abs(multiplier) * common_divisor(self.values[rows])
            for multiplier, rows in self._by_multiplier()
        )

    def on(self, grid: Fraction) -> MoneyArray:
        """Return value / ``grid``, whole by the choice of ``grid``; int64 where all fit."""
        parts = [(multiplier / grid, rows) for multiplier, rows in self._by_multiplier()]
        sizes = [
            largest(self.values[rows]) // ratio.denominator * abs(ratio.numerator)
            for ratio, rows in parts
        ]
        wide = self.values.dtype == object or any(
            size >= SAFE or max(ratio.denominator, abs(ratio.numerator)) >= SAFE
            for size, (ratio, _) in zip(sizes, parts, strict=True)
        )
        source = self.values.astype(object) if wide else self.values
        result = np.zeros(source.shape[0], object if wide else np.int64)
        for ratio, rows in parts:
            # Division takes long, and is by 1 more often than not.
            whole = source[rows] if ratio.denominator == 1 else source[rows] // ratio.denominator
            result[rows] = whole if ratio.numerator == 1 else whole * ratio.numerator
        return result.astype(np.int64) if wide and max(sizes, default=0) < SAFE else result

    def rounded(self, *, up: bool, what: str) -> IntArray:
        """Return every value (0 or more) rounded down, or up, to a whole number as int64.

        Raises ``NumbersTooLargeError`` that names ``what`` where a number reaches 2**62.
        """
        result = np.zeros(self.values.shape[0], np.int64)
        for multiplier, rows in self._by_multiplier():
            values, above, below = self.values[rows], multiplier.numerator, multiplier.denominator
            if largest(values) * above >= SAFE or below >= SAFE:
                values = values.astype(object)
            steps = -(-values * above // below) if up else values * above // below
            if largest(steps) >= SAFE:
                raise NumbersTooLargeError(f"{what} is 2^62 steps or more.")
            result[rows] = steps
        return result

    def _by_multiplier(self) -> Iterable[tuple[Fraction, Any]]:
        """Yield each multiplier in use with the rows that have it."""
        if len(self.multipliers) == 1:
            if self.values.shape[0]:
                yield self.multipliers[0], slice(None)
            return
        for code in np.flatnonzero(np.bincount(self.codes, minlength=len(self.multipliers))):
            yield self.multipliers[code], np.flatnonzero(self.codes == code)


def common_grid(grids: Iterable[Fraction]) -> Fraction:
    """Return the largest number of which all ``grids`` are whole multiples; 0 of nothing."""
    found = Fraction(0)
    for grid in grids:
        above = math.gcd(found.numerator * grid.denominator, grid.numerator * found.denominator)
        found = Fraction(above, found.denominator * grid.denominator)
    return found


def common_divisor(values: MoneyArray) -> int:
    """Return the greatest common divisor of all values, 0 of nothing or zeros only."""
    if values.dtype == object:
        return math.gcd(0, *(int(value) for value in values.tolist()))
    # A few values bring the divisor down almost always; the rest is only checked against it.
    found, sample, rest = 0, 1024, values
    while rest.shape[0]:
        found = math.gcd(found, int(np.gcd.reduce(rest[:sample])))
        if found == 1:
            return 1
        rest = rest[sample:]
        rest = rest[rest != 0] if found == 0 else rest[rest % found != 0]
    return found


def cost_scale(grids: Iterable[Fraction]) -> Fraction:
    """Return the factor that makes all money of a run whole and without a common divisor."""
    grid = common_grid(grids)
    return 1 / grid if grid else Fraction(1)
