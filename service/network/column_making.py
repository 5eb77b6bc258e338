"""Columns made of what was read: absent ones, thinned ones, and texts in their one spelling."""

from collections.abc import Mapping, Sequence
from typing import Final, TypeVar

import numpy as np

from service.network.columns import BoolArray, CodeArray, Decimals, IdArray, IntArray, Texts
from service.network.quantities import least_exponent
from service.network.sheets import Column

_Values = TypeVar("_Values", BoolArray, CodeArray, IntArray)

ABSENT: Final = -1
_MULTIPLIER: Final = np.uint64(0x9E3779B97F4A7C15)


def no_texts(rows: int) -> Texts:
    """Return a column without any text; it takes no memory, and cannot be written to."""
    return Texts(codes=np.broadcast_to(np.int32(ABSENT), rows), values=())


def no_decimals(rows: int) -> Decimals:
    """Return a column without any number; it takes no memory, and cannot be written to."""
    return Decimals(
        values=np.broadcast_to(np.int64(0), rows),
        present=np.broadcast_to(np.bool_(False), rows),  # noqa: FBT003 - a value, not a switch
        exponent=0,
    )


def without(column: Decimals, rows: BoolArray) -> Decimals:
    """Return a column in which ``rows`` have no number."""
    if not rows.any():
        return column
    values = np.where(rows, 0, column.values)
    return least_exponent(values, column.present & ~rows, column.exponent)


def as_ids(texts: Sequence[str | None]) -> IdArray:
    """Return ids as a column of UTF-8, ``b""`` where there is none."""
    encoded = [b"" if text is None else text.encode() for text in texts]
    return np.array(encoded, dtype=np.bytes_) if encoded else np.zeros(0, dtype="S1")


def all_different(ids: IdArray) -> bool:
    """Return whether no two ids are equal, without comparing them as long as numbers can tell."""
    if len(ids) < 2:
        return True
    width = ids.dtype.itemsize
    words = np.zeros((len(ids), -(-width // 8)), dtype=np.uint64)
    words.view(np.uint8).reshape(len(ids), -1)[:, :width] = (
        np.ascontiguousarray(ids).view(np.uint8).reshape(len(ids), width)
    )
    hashes = np.zeros(len(ids), dtype=np.uint64)
    for word in words.T:
        hashes = (hashes ^ word) * _MULTIPLIER
        hashes ^= hashes >> np.uint64(29)
    hashes.sort()
    if not bool((hashes[1:] == hashes[:-1]).any()):
        return True
    return len(np.unique(ids)) == len(ids)


def by_row(column: Column, found: _Values) -> _Values:
    """Return what was found for each value as what holds for each row."""
    return found if column.take is None else found[column.take]


def texts_column(
    column: Column, values: Sequence[str | None], kept: Mapping[str, str | None]
) -> Texts:
    """Return a column of texts: for each value the text that ``kept`` has for it, if any.

    The values of the result are sorted, distinct and all used.
    """
    distinct = sorted({text for text in kept.values() if text})
    code = {text: number for number, text in enumerate(distinct)}
    by_value: dict[str | None, int] = {
        value: code[text] if text else ABSENT for value, text in kept.items()
    }
    by_value[None] = ABSENT
    codes = np.fromiter(map(by_value.__getitem__, values), dtype=np.int32, count=len(values))
    return used_only(Texts(codes=by_row(column, codes), values=tuple(distinct)))


def used_only(column: Texts) -> Texts:
    """Return a column of texts without the values that no row has."""
    one_for_all = len(column.values) == 1 and column.codes.strides == (0,)
    if not column.values or (one_for_all and len(column.codes) > 0 and column.codes[0] == 0):
        return column
    used = np.zeros(len(column.values) + 1, dtype=np.bool_)
    used[column.codes] = True
    used[-1] = True
    if bool(used.all()):
        return column
    code = np.cumsum(used, dtype=np.int32) - 1
    code[-1] = ABSENT
    values = tuple(text for text, kept in zip(column.values, used.tolist(), strict=False) if kept)
    return Texts(codes=code[column.codes], values=values)
