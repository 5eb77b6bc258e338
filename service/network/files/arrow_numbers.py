"""Whole numbers and decimals of Arrow as scaled integers, by array operations, exactly."""

from typing import TYPE_CHECKING, Final

import numpy as np

from service.network.columns import BoolArray, IntArray
from service.network.exact_numbers import ExactNumbers

if TYPE_CHECKING:
    import pyarrow as pa

# No kind of number has more decimals; a column may have more as long as they are zeros.
_DECIMALS_MAX: Final = 6
_DIGITS_MAX: Final = 38


def is_number(form: "pa.DataType") -> bool:
    """Return whether a type holds exact numbers of at most 38 digits."""
    import pyarrow as pa  # noqa: PLC0415 - loads when a column of Arrow comes

    if pa.types.is_integer(form):
        return True
    is_decimal = pa.types.is_decimal(form) and not pa.types.is_decimal256(form)
    return bool(is_decimal and form.scale >= 0)


def exact_numbers(column: "pa.ChunkedArray") -> ExactNumbers:
    """Return a column of whole numbers or decimals as scaled integers."""
    import pyarrow as pa  # noqa: PLC0415 - see above
    import pyarrow.compute as pc  # noqa: PLC0415 - likewise

    if pa.types.is_integer(column.type):
        if column.type != pa.uint64():
            values = pc.fill_null(column.cast(pa.int64()), 0).to_numpy().copy()
            return _numbers(values, _present(column), 0, {}, {})
        column = column.cast(pa.decimal128(20, 0))
    scale = column.type.scale
    column = column.cast(pa.decimal128(_DIGITS_MAX, scale))
    present = _present(column)
    too_fine: dict[int, str] = {}
    if scale <= _DECIMALS_MAX:
        values, wide = _scaled(column, present)
        if not len(wide):
            return _numbers(values, present, scale, {}, {})
    else:
        fine = _differs(column, pc.round(column, ndigits=_DECIMALS_MAX, round_mode="towards_zero"))
        too_fine = _texts(column, fine)
        if too_fine:
            keep = np.ones(len(column), dtype=np.bool_)
            keep[fine] = False
            column = pc.if_else(pa.array(keep), column, None)
    column = _least(column)
    values, wide = _scaled(column, present)
    return _numbers(values, present, column.type.scale, too_fine, _texts(column, wide))


def _least(column: "pa.ChunkedArray") -> "pa.ChunkedArray":
    """Return a column with the least number of decimals that loses nothing."""
    import pyarrow as pa  # noqa: PLC0415 - see above
    import pyarrow.compute as pc  # noqa: PLC0415 - likewise

    for decimals in range(_DECIMALS_MAX):
        rounded = pc.round(column, ndigits=decimals, round_mode="towards_zero")
        if decimals >= column.type.scale or not len(_differs(column, rounded)):
            return rounded.cast(pa.decimal128(_DIGITS_MAX, min(decimals, column.type.scale)))
    return column.cast(pa.decimal128(_DIGITS_MAX, min(_DECIMALS_MAX, column.type.scale)))


def _scaled(column: "pa.ChunkedArray", present: BoolArray) -> tuple[IntArray, IntArray]:
    """Return decimals as 64 bits, 0 where absent, and the rows that do not fit."""
    pairs = [_words(chunk) for chunk in column.chunks]
    words = np.concatenate(pairs) if pairs else np.zeros((0, 2), dtype=np.int64)
    low, high = words[:, 0], words[:, 1]
    # What fits in 64 bits has nothing but copies of its sign above them.
    wide = np.flatnonzero(present & (high != low >> 63))
    values = np.where(present, low, 0)
    values[wide] = 0
    return values, wide


def _words(chunk: "pa.Array") -> IntArray:
    """Return the low and the high 64 bits of each decimal, in shape (rows, 2)."""
    data = chunk.buffers()[1]
    if data is None or not len(chunk):
        return np.zeros((len(chunk), 2), dtype=np.int64)
    words = np.frombuffer(data, dtype=np.int64, count=2 * (chunk.offset + len(chunk)))
    return words.reshape(-1, 2)[chunk.offset :]


def _present(column: "pa.ChunkedArray") -> BoolArray:
    """Return in which rows there is a value."""
    import pyarrow.compute as pc  # noqa: PLC0415 - see above

    present: BoolArray = pc.is_valid(column).to_numpy().astype(np.bool_)
    return present


def _differs(column: "pa.ChunkedArray", other: "pa.ChunkedArray") -> IntArray:
    """Return the rows in which two columns have different values."""
    import pyarrow.compute as pc  # noqa: PLC0415 - see above

    unequal = pc.fill_null(pc.not_equal(column, other), fill_value=False)
    return np.flatnonzero(unequal.to_numpy())


def _texts(column: "pa.ChunkedArray", rows: IntArray) -> dict[int, str]:
    """Return the digits of a few values, for a report; zeros that the type adds were not sent."""
    texts = {row: format(column[row].as_py(), "f") for row in rows.tolist()}
    return {
        row: text.rstrip("0").rstrip(".") if "." in text else text for row, text in texts.items()
    }


def _numbers(
    values: IntArray,
    present: BoolArray,
    exponent: int,
    too_fine: dict[int, str],
    too_large: dict[int, str],
) -> ExactNumbers:
    """Return numbers, those that are not held taken out."""
    fine, large = (np.array(sorted(rows), dtype=np.int64) for rows in (too_fine, too_large))
    for rows in (fine, large):
        present[rows] = False
        values[rows] = 0
    return ExactNumbers(
        values=values,
        present=present,
        exponent=exponent,
        too_fine=fine,
        too_large=large,
        unheld=too_fine | too_large,
    )
