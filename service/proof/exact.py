"""Exact arithmetic on columns: int64 where the range is proved to allow it, else Python's integers.

Every function bounds its result before it computes in 64 bits; there is no float and no overflow.
"""

from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import NDArray

from service.network.columns import BoolArray

# An array of whole numbers: int64, or objects that are Python integers.
Whole = NDArray[Any]
Positions = NDArray[np.integer[Any]]

# Sums of two numbers below it stay within int64.
ROOM = 2**62


def magnitude(values: Whole) -> int:
    """Return the largest absolute value, 0 if there are none."""
    if values.size == 0:
        return 0
    return max(abs(int(values.min())), abs(int(values.max())))


def whole(values: list[int]) -> Whole:
    """Return ``values`` as int64 where all fit, else as objects."""
    if all(-ROOM < value < ROOM for value in values):
        return np.array(values, dtype=np.int64)
    array = np.empty(len(values), dtype=object)
    array[:] = values
    return array


def times(values: Whole, factor: int) -> Whole:
    """Return ``values * factor``; times 1 these are ``values`` themselves."""
    if factor == 1:
        return values
    # Zeros times a factor beyond int64 are small, but the factor is not.
    small = abs(factor) < ROOM and values.dtype != object
    if small and magnitude(values) * abs(factor) < ROOM:
        return values * np.int64(factor)
    return values.astype(object) * factor


def floor_of(values: Whole, ratio: Fraction) -> Whole:
    """Return floor(values * ratio)."""
    numerator = times(values, ratio.numerator)
    if ratio.denominator == 1:
        return numerator
    if ratio.denominator >= ROOM:
        return numerator.astype(object) // ratio.denominator
    return numerator // ratio.denominator


def whole_of(values: Whole, ratio: Fraction) -> tuple[Whole, BoolArray]:
    """Return values * ratio, rounded down, and where it was no whole number."""
    numerator = times(values, ratio.numerator)
    if ratio.denominator == 1:
        return numerator, np.broadcast_to(np.False_, values.shape)
    if ratio.denominator >= ROOM:
        numerator = numerator.astype(object)
    broken = (numerator % ratio.denominator != 0).astype(np.bool_)
    return numerator // ratio.denominator, broken


def plus(first: Whole, second: Whole) -> Whole:
    """Return ``first + second``."""
    if magnitude(first) + magnitude(second) >= 2 * ROOM:
        first, second = first.astype(object), second.astype(object)
    result: Whole = first + second
    return result


def sums_at(places: int, position: Positions, values: Whole) -> Whole:
    """Return for each of ``places`` the sum of the values at that position."""
    if values.dtype != object and magnitude(values) * max(1, len(values)) < ROOM:
        sums = np.zeros(places, dtype=np.int64)
    else:
        sums = np.zeros(places, dtype=object)
        values = values.astype(object)
    np.add.at(sums, position, values)
    return sums


def total(values: Whole) -> int:
    """Return the sum of ``values``."""
    if values.dtype != object and magnitude(values) * max(1, len(values)) < ROOM:
        return int(values.sum())
    return sum(values.tolist())


def repeated(value: int, count: int) -> Whole:
    """Return ``count`` times ``value``, as a column that takes no memory and cannot be written."""
    return np.broadcast_to(np.int64(value), (count,))


def joined(parts: list[Whole]) -> Whole:
    """Return the parts one after the other."""
    if any(part.dtype == object for part in parts):
        return np.concatenate([part.astype(object) for part in parts])
    return np.concatenate(parts)
