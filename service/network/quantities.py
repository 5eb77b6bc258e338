r"""Exact numbers: decimal text to fractions and scaled integers and back; nothing passes a float.

What is accepted at the door is ``-?(0|[1-9][0-9]*)(\.[0-9]+)?``: no exponent, no plus sign, no
spaces, and decimals counted as written. A scaled value stays below 2**62, so that the sum of
two never leaves 64 bits.
"""

import re
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from service.network.columns import BoolArray, Decimals, IntArray

ByteArray = NDArray[np.uint8]

SCALED_LIMIT = 2**62
QUANTITY_DECIMALS_MAX = 3
RATE_DECIMALS_MAX = 6

# Enough for any total of a network; keeps the reading of a hostile text linear.
EXACT_TEXT_CHARACTERS_MAX = 4000
ROWS_AT_ONCE = 2**18
# Below 10**18 every number of so many digits, scaled, fits in int64 without a look at its value.
DIGITS_SAFE = 18

_DECIMAL = re.compile(r"-?(?:0|[1-9][0-9]*)(?:\.[0-9]+)?")
_RATIO = re.compile(r"(-?[1-9][0-9]*)/([1-9][0-9]*)")

_MINUS, _DOT, _ZERO, _NINE, _LINE_FEED = (ord(letter) for letter in "-.09\n")


class NumberFaultError(ValueError):
    """A text is not an acceptable number; ``code`` says in which way."""

    def __init__(self, code: str, detail: str) -> None:
        """Keep the stable code beside the sentence for a person."""
        super().__init__(detail)
        self.code = code
        self.detail = detail


NOT_A_NUMBER = (
    "not_a_number",
    "Not a plain decimal number such as 12 or 0.215 (no exponent, plus sign or leading zero).",
)
TOO_LARGE = (
    "number_too_large",
    "Too large: at the decimals of its column, the number without its point must be below 2^62.",
)


def too_many_decimals(decimals_max: int) -> tuple[str, str]:
    """Return code and sentence for a number with more decimals than its kind has."""
    return "too_many_decimals", f"At most {decimals_max} decimals here; round it at the source."


def exact_text(value: Fraction) -> str:
    """Return the one text of an exact number: the shortest plain decimal, else ``N/D``.

    A denominator with a prime factor other than 2 and 5 has no finite decimal; it arises, for
    example, from a pallet of 48.
    """
    rest = value.denominator
    twos = (rest & -rest).bit_length() - 1
    rest >>= twos
    fives = 0
    while rest % 5 == 0:
        rest //= 5
        fives += 1
    if rest != 1:
        return f"{value.numerator}/{value.denominator}"
    decimals = max(twos, fives)
    digits = str(abs(value.numerator) * 10**decimals // value.denominator)
    sign = "-" if value < 0 else ""
    if decimals == 0:
        return sign + digits
    digits = digits.rjust(decimals + 1, "0")
    return f"{sign}{digits[:-decimals]}.{digits[-decimals:]}"


def parse_exact(text: str) -> Fraction:
    """Read what ``exact_text`` writes; raise ``ValueError`` for every other form."""
    if len(text) <= EXACT_TEXT_CHARACTERS_MAX:
        if _DECIMAL.fullmatch(text):
            return Fraction(text)
        ratio = _RATIO.fullmatch(text)
        if ratio:
            return Fraction(int(ratio[1]), int(ratio[2]))
    raise ValueError("not an exact number")


def read_decimal(text: str, *, decimals_max: int) -> Fraction:
    """Read one number of an input; raise ``NumberFaultError`` with the code of its fault.

    The limit of 2**62 holds for the value scaled to its own decimals, trailing zeros left out.
    """
    if not _DECIMAL.fullmatch(text):
        raise NumberFaultError(*NOT_A_NUMBER)
    whole, _, decimals = text.partition(".")
    if len(decimals) > decimals_max:
        raise NumberFaultError(*too_many_decimals(decimals_max))
    if len(whole) > DIGITS_SAFE + 2:
        raise NumberFaultError(*TOO_LARGE)
    if abs(int(whole + decimals.rstrip("0"))) >= SCALED_LIMIT:
        raise NumberFaultError(*TOO_LARGE)
    return Fraction(text)


@dataclass(frozen=True, slots=True, kw_only=True)
class ReadDecimals:
    """A column of numbers as read, and the rows of it that are faulty, ascending.

    Faulty rows are absent from ``decimals``, so that no later check sees a guess.
    """

    decimals: Decimals
    malformed: IntArray
    too_fine: IntArray
    too_large: IntArray


def read_decimals(
    texts: Sequence[str], *, present: BoolArray | None = None, decimals_max: int
) -> ReadDecimals:
    """Read a column of decimal texts by array operations.

    Parameters
    ----------
    texts
        One text a row, as sent; whatever stands where ``present`` is False is not looked at.
    present
        Shape (rows,); None means that every row has a value.
    decimals_max
        Most decimals that a text may have, as written.
    """
    rows = len(texts)
    given = np.ones(rows, dtype=np.bool_) if present is None else present
    values = np.zeros(rows, dtype=np.int64)
    decimals = np.zeros(rows, dtype=np.int64)
    malformed, too_fine, too_large = (np.zeros(rows, dtype=np.bool_) for _ in range(3))
    for start in range(0, rows, ROWS_AT_ONCE):
        part = slice(start, min(start + ROWS_AT_ONCE, rows))
        _read_part(
            texts[part],
            given[part],
            decimals_max,
            out=(values[part], decimals[part], malformed[part], too_fine[part], too_large[part]),
        )
    sound = given & ~malformed & ~too_fine & ~too_large
    exponent = int(decimals.max(where=sound, initial=0))
    missing_decimals = exponent - decimals
    room = (SCALED_LIMIT - 1) // 10 ** np.arange(exponent + 1, dtype=np.int64)
    wide = sound & (np.abs(values) > room[np.where(sound, missing_decimals, 0)])
    too_large |= wide
    sound &= ~wide
    values *= np.where(sound, 10 ** np.where(sound, missing_decimals, 0), 0)
    return ReadDecimals(
        decimals=least_exponent(values, sound, exponent),
        malformed=np.flatnonzero(malformed),
        too_fine=np.flatnonzero(too_fine),
        too_large=np.flatnonzero(too_large),
    )


def least_exponent(values: IntArray, present: BoolArray, exponent: int) -> Decimals:
    """Return a column whose exponent is the least that keeps every value whole."""
    # A few values mostly show that there is nothing to do.
    while exponent > 0 and not np.any(values[:1024] % 10) and not np.any(values % 10):
        values = values // 10
        exponent -= 1
    return Decimals(values=values, present=present, exponent=exponent)


def exact_sum(column: Decimals) -> Fraction:
    """Return the sum of a column, exact also where it leaves 64 bits."""
    # Halves of 31 bits cannot overflow for fewer than 2**32 rows.
    high = int((column.values >> 31).sum())
    low = int((column.values & (2**31 - 1)).sum())
    return Fraction((high << 31) + low, 10**column.exponent)


def _read_part(
    texts: Sequence[str],
    given: BoolArray,
    decimals_max: int,
    *,
    out: tuple[IntArray, IntArray, BoolArray, BoolArray, BoolArray],
) -> None:
    """Read some rows into ``out``: value without its point, decimals, and the three faults."""
    values, decimals, malformed, too_fine, too_large = out
    data = _joined(texts)
    ends = np.flatnonzero(data == _LINE_FEED)
    starts = np.concatenate(([0], ends[:-1] + 1))
    first = starts + (data[starts] == _MINUS)

    dots = np.flatnonzero(data == _DOT)
    dot_rows = np.searchsorted(ends, dots)
    bad = _off_pattern(data, starts=starts, ends=ends, dots=dots, dot_rows=dot_rows)

    points = ends.copy()
    points[dot_rows] = dots
    written = np.maximum(ends - points - 1, 0)
    whole = points - first
    np.logical_and(given, bad, out=malformed)
    sound = given & ~bad
    np.logical_and(sound, written > decimals_max, out=too_fine)
    sound &= ~too_fine
    np.logical_and(sound, whole > DIGITS_SAFE + 2, out=too_large)
    sound &= ~too_large
    negative = first > starts

    long = sound & (whole + written > DIGITS_SAFE)
    for row in np.flatnonzero(long).tolist():
        fraction, _, tail = texts[row].partition(".")
        tail = tail.rstrip("0")
        scaled = int(fraction + tail)
        if abs(scaled) >= SCALED_LIMIT:
            too_large[row] = True
        else:
            values[row], decimals[row] = scaled, len(tail)

    short = sound & ~long
    found = np.zeros(len(ends), dtype=np.int64)
    width = int((ends - first).max(where=short, initial=0))
    for offset in range(width):
        here = first + offset
        active = short & (here < ends) & (here != points)
        digit = data[np.minimum(here, len(data) - 1)].astype(np.int64) - _ZERO
        found = np.where(active, found * 10 + digit, found)
    written = np.where(short, written, 0)
    for _ in range(decimals_max):
        # Trailing zeros after the point change nothing and must not cost range.
        idle = (written > 0) & (found % 10 == 0)
        if not idle.any():
            break
        found = np.where(idle, found // 10, found)
        written = written - idle
    np.copyto(values, np.where(negative, -found, found), where=short)
    np.copyto(decimals, written, where=short)


def _off_pattern(
    data: ByteArray, *, starts: IntArray, ends: IntArray, dots: IntArray, dot_rows: IntArray
) -> BoolArray:
    r"""Tell which lines of ``data`` are no ``-?(0|[1-9][0-9]*)(\.[0-9]+)?``."""
    first = starts + (data[starts] == _MINUS)
    is_digit = (data >= _ZERO) & (data <= _NINE)
    odd = ~is_digit
    odd[ends] = False
    odd[dots] = False
    odd[starts] &= first == starts
    bad = np.zeros(len(ends), dtype=np.bool_)
    bad[np.searchsorted(ends, np.flatnonzero(odd))] = True
    bad |= np.bincount(dot_rows, minlength=len(ends)) > 1
    # A digit must stand on both ends, and a leading zero alone before the point.
    bad |= ~is_digit[first] | ~is_digit[np.maximum(ends - 1, 0)]
    bad |= (data[first] == _ZERO) & is_digit[np.minimum(first + 1, len(data) - 1)]
    return bad


def _joined(texts: Sequence[str]) -> ByteArray:
    """Return the texts as ASCII, one line each; what is not ASCII becomes a question mark."""
    lines = "\n".join(texts)
    if lines.count("\n") != len(texts) - 1:
        lines = "\n".join(text.replace("\n", "?") for text in texts)
    return np.frombuffer(lines.encode("ascii", "replace") + b"\n", dtype=np.uint8)
