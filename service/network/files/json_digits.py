"""Decimal digits of many numbers at once: eight characters in one 64-bit word.

What is read here is surely a plain decimal number or null; whatever else stands there, the answer
is None, and the exact reader decides. The digits of a word are added up in three multiplications,
two neighbours at a time (the method is folklore; each step is checked by the tests).
"""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np

from service.network.columns import BoolArray, Decimals, IntArray
from service.network.files.json_blocks import LEAD, Block, ByteArray, WordArray
from service.network.quantities import SCALED_LIMIT, least_exponent

DECIMALS_MAX: Final = 6

_ZEROS = np.uint64(0x3030303030303030)
_ONES = np.uint64(0x0101010101010101)
_HIGH = np.uint64(0x8080808080808080)
# Added to a byte above 9, it sets the highest bit.
_NINE_ROOM = np.uint64(0x7676767676767676)
# A point, once the bits of "0" are taken out of it.
_POINTS = np.uint64(0x1E1E1E1E1E1E1E1E)
_PAIRS = (
    (np.uint64(0x0F0F0F0F0F0F0F0F), np.uint64(10 * 2**8 + 1), np.uint64(8)),
    (np.uint64(0x00FF00FF00FF00FF), np.uint64(100 * 2**16 + 1), np.uint64(16)),
    (np.uint64(0x0000FFFF0000FFFF), np.uint64(10_000 * 2**32 + 1), np.uint64(32)),
)
_NULL = np.uint64(int.from_bytes(b"null", "little"))
_ZERO, _MINUS, _SMALL_N = (np.uint8(ord(letter)) for letter in "0-n")
_POWERS = 10 ** np.arange(DECIMALS_MAX + 1, dtype=np.int64)


@dataclass(slots=True, kw_only=True)
class Digits:
    """Numbers as they were written: ``values / 10**decimals``, 0 where null.

    ``values`` int64, ``decimals`` uint8 and ``null`` bool, all of shape (numbers,).
    """

    values: IntArray
    decimals: ByteArray
    null: BoolArray

    @classmethod
    def room(cls, count: int) -> "Digits":
        """Return room for so many numbers."""
        return cls(
            values=np.zeros(count, dtype=np.int64),
            decimals=np.zeros(count, dtype=np.uint8),
            null=np.zeros(count, dtype=np.bool_),
        )

    def part(self, start: int, count: int) -> "Digits":
        """Return the room for ``count`` numbers from ``start`` on, which is the same memory."""
        place = slice(start, start + count)
        return Digits(
            values=self.values[place], decimals=self.decimals[place], null=self.null[place]
        )

    @classmethod
    def joined(cls, parts: Sequence["Digits"]) -> "Digits":
        """Return numbers that follow each other as one."""
        return cls(
            values=np.concatenate([part.values for part in parts]),
            decimals=np.concatenate([part.decimals for part in parts]),
            null=np.concatenate([part.null for part in parts]),
        )

    def spread(self, places: IntArray, rows: int) -> "Digits":
        """Return the numbers at ``places`` of so many rows, which are null otherwise."""
        spread = Digits.room(rows)
        spread.null[:] = True
        spread.values[places] = self.values
        spread.decimals[places] = self.decimals
        spread.null[places] = self.null
        return spread

    @property
    def most_decimals(self) -> int:
        """Return the largest number of decimals that was written."""
        return int(self.decimals.max(initial=0))

    @property
    def fits(self) -> bool:
        """Return whether the numbers fit into one column at the decimals of the finest."""
        finest = self.most_decimals
        if _largest(self.values) * 10**finest < SCALED_LIMIT:
            return True
        return all(
            _largest(self.values[self.decimals == decimals]) * 10 ** (finest - decimals)
            < SCALED_LIMIT
            for decimals in range(finest + 1)
        )

    def without(self, rows: BoolArray) -> "Digits":
        """Return the numbers without those of ``rows``, which become null."""
        return Digits(
            values=np.where(rows, 0, self.values),
            decimals=np.where(rows, np.uint8(0), self.decimals),
            null=self.null | rows,
        )

    def column(self) -> Decimals:
        """Return the numbers, which fit, as a column."""
        exponent = self.most_decimals
        values = self.values
        if bool((self.decimals != exponent).any()):
            values = values * _POWERS[exponent - self.decimals.astype(np.int64)]
        return least_exponent(values, ~self.null, exponent)


def _largest(values: IntArray) -> int:
    """Return the largest absolute value."""
    return max(int(values.max(initial=0)), -int(values.min(initial=0)))


class _NoNumberError(Exception):
    """Something is neither a plain number nor null, or has too many digits for two words."""


def read_digits(block: Block, *, starts: IntArray, ends: IntArray, into: Digits) -> bool:
    """Read the numbers of ``block`` from ``starts`` to ``ends``; return whether it could.

    ``into`` is room for so many numbers, with nothing in it yet.
    """
    if len(starts) == 0:
        return True
    try:
        _read(block, starts, ends, into)
    except _NoNumberError:
        return False
    return True


def _read(block: Block, starts: IntArray, ends: IntArray, into: Digits) -> None:
    """Read numbers; raise ``_NoNumberError`` where one is none."""
    length = ends - starts
    _require((length >= 1) & (length <= LEAD))
    first, last_word = block.data[starts], block.words[ends - 8]
    null = first == _SMALL_N
    if bool(null.any()):
        _require(~null | ((length == len("null")) & (last_word >> np.uint64(32) == _NULL)))
        into.null[:] = null
        # Nothing is read of a null, and nothing is found wrong with it.
        length = np.where(null, 0, length)
    negative = first == _MINUS
    signed = bool(negative.any())
    if signed:
        length = length - negative
        first = block.data[starts + negative]
    lower = _last(last_word, np.minimum(length, 8))
    upper: WordArray | None = None
    if int(length.max()) > 8:
        upper = _last(block.words[ends - 16], np.clip(length - 8, 0, 8))
    whole: IntArray = length
    points = _points(lower)
    if bool(points.any()):
        pointed = points != 0
        into.decimals[:] = decimals = _decimals(points, pointed)
        whole = length - decimals - pointed
        lower, upper = _closed_up(lower, upper, points, pointed)
    # At least one digit before the point, and no idle zero in front of others.
    _require(null | ((whole >= 1) & ((first != _ZERO) | (whole == 1))))
    values = _value(lower, upper)
    into.values[:] = np.where(negative, -values, values) if signed else values


def _require(sound: BoolArray) -> None:
    """Raise ``_NoNumberError`` unless all are ``sound``."""
    if not bool(sound.all()):
        raise _NoNumberError


def _last(word: WordArray, count: IntArray) -> WordArray:
    """Return the last ``count`` bytes of words, "0" as 0, and 0 in the place of the others."""
    idle = (64 - 8 * count).astype(np.uint64)
    return ((word ^ _ZEROS) >> idle) << idle


def _points(lower: WordArray) -> WordArray:
    """Return words in which the highest bit of each byte is set that is a point.

    A byte above a point may be marked wrongly; it is no digit then either.
    """
    rest = lower ^ _POINTS
    return (rest - _ONES) & ~rest & _HIGH


def _decimals(points: WordArray, pointed: BoolArray) -> ByteArray:
    """Return how many digits stand behind each point, 0 where there is none."""
    _require((points & (points - np.uint64(1))) == 0)
    behind = np.uint8(7) - (np.bitwise_count(points - np.uint64(1)) >> np.uint8(3))
    decimals = np.where(pointed, behind, np.uint8(0))
    _require(~pointed | ((decimals >= 1) & (decimals <= DECIMALS_MAX)))
    return decimals


def _closed_up(
    lower: WordArray, upper: WordArray | None, points: WordArray, pointed: BoolArray
) -> tuple[WordArray, WordArray | None]:
    """Return words without their point: what stands before it moves up by one byte."""
    bit = points >> np.uint64(7)
    shift = pointed.astype(np.uint64) << np.uint64(3)
    # Without a point the mask has every bit, and the shift none.
    before = (lower & (bit - np.uint64(1))) << shift
    behind = np.where(pointed, lower & ~((bit << np.uint64(8)) - np.uint64(1)), np.uint64(0))
    if upper is None:
        return behind | before, None
    carried = np.where(pointed, upper >> np.uint64(56), np.uint64(0))
    return behind | before | carried, upper << shift


def _value(lower: WordArray, upper: WordArray | None) -> IntArray:
    """Return the numbers whose digits are the bytes of two words, the lowest byte first."""
    _require_digits(lower)
    value = _added_up(lower)
    if upper is not None:
        _require_digits(upper)
        value = value + _added_up(upper) * np.uint64(10**8)
    return value.view(np.int64)


def _require_digits(word: WordArray) -> None:
    """Raise ``_NoNumberError`` unless every byte of every word is 9 at most."""
    _require(((word | (word + _NINE_ROOM)) & _HIGH) == 0)


def _added_up(word: WordArray) -> WordArray:
    """Return the number whose eight digits are the bytes of a word, the lowest byte first."""
    for mask, factor, shift in _PAIRS:
        word = ((word & mask) * factor) >> shift
    return word
