"""Columns of Arrow as few distinct values and, for each row, which of them it has."""

from collections.abc import Callable
from typing import TYPE_CHECKING, Final

import numpy as np

from service.network.faults import Odd
from service.network.files.grids import Cells
from service.network.files.json import Number
from service.network.moments import DATE_ADVICE

if TYPE_CHECKING:
    import pyarrow as pa

# No id, tag or role may hold it: it is a control character.
_JOINT: Final = "\x1f"
_MIDNIGHT: Final = " 00:00:00"


def is_text(form: "pa.DataType") -> bool:
    """Return whether a type holds texts, each in full or as one of a dictionary."""
    import pyarrow as pa  # noqa: PLC0415 - loads when a column of Arrow comes

    kinds = pa.types
    if kinds.is_dictionary(form):
        form = form.value_type
    return bool(kinds.is_string(form) or kinds.is_large_string(form) or kinds.is_string_view(form))


def is_text_list(form: "pa.DataType") -> bool:
    """Return whether a type holds lists of texts."""
    import pyarrow as pa  # noqa: PLC0415 - see above

    is_list = pa.types.is_list(form) or pa.types.is_large_list(form)
    return bool(is_list and is_text(form.value_type))


def text_cells(column: "pa.ChunkedArray") -> Cells:
    """Return texts as they stand."""
    import pyarrow as pa  # noqa: PLC0415 - see above

    if not pa.types.is_dictionary(column.type):
        column = column.cast(pa.large_string())
    return _distinct(column, lambda values: values.cast(pa.large_string()).to_pylist())


def whole_cells(column: "pa.ChunkedArray") -> Cells:
    """Return small whole numbers."""
    return _distinct(
        column,
        lambda values: [
            None if value is None else Number(str(value)) for value in values.to_pylist()
        ],
    )


def moment_cells(column: "pa.ChunkedArray") -> Cells:
    """Return time stamps with a zone as RFC 3339 in UTC, every digit kept."""
    import pyarrow as pa  # noqa: PLC0415 - see above

    return _distinct(
        column.cast(pa.timestamp(column.type.unit, "UTC")),
        lambda values: [
            None if text is None else text.replace(" ", "T", 1)
            for text in values.cast(pa.string()).to_pylist()
        ],
    )


def date_cells(column: "pa.ChunkedArray") -> Cells:
    """Return dates; a time stamp without a zone is one where it says midnight."""
    import pyarrow as pa  # noqa: PLC0415 - see above

    if pa.types.is_date64(column.type):
        column = column.cast(pa.timestamp("ms"))

    def dates(values: "pa.Array") -> list[object]:
        found: list[object] = []
        for text in values.cast(pa.string()).to_pylist():
            day, _, time = (text or "").partition(" ")
            is_date = text is None or not time or f" {time}".rstrip("0.") == _MIDNIGHT.rstrip("0")
            found.append((day or None) if is_date else Odd("bad_date", DATE_ADVICE, text))
        return found

    return _distinct(column, dates)


def list_cells(column: "pa.ChunkedArray") -> Cells:
    """Return lists of texts; equal ones are made once."""
    import pyarrow as pa  # noqa: PLC0415 - see above
    import pyarrow.compute as pc  # noqa: PLC0415 - likewise

    elements = pc.list_flatten(column)
    plain = (
        not elements.null_count
        and not pc.any(pc.match_substring(elements.cast(pa.large_string()), _JOINT)).as_py()
        and not pc.any(pc.equal(elements.cast(pa.large_string()), "")).as_py()
    )
    if not plain:
        return Cells(values=column.to_pylist())
    texts = column.cast(pa.large_list(pa.large_string()))
    joined = pc.binary_join(texts, pa.scalar(_JOINT, pa.large_string()))
    return _distinct(
        joined,
        lambda values: [
            None if text is None else text.split(_JOINT) if text else []
            for text in values.to_pylist()
        ],
    )


def _distinct(column: "pa.ChunkedArray", made: Callable[["pa.Array"], list[object]]) -> Cells:
    """Return the distinct values of a column, ``made`` into Python's, and which each row has."""
    import pyarrow as pa  # noqa: PLC0415 - see above
    import pyarrow.compute as pc  # noqa: PLC0415 - likewise

    if pa.types.is_dictionary(column.type) and any(
        chunk.dictionary.null_count for chunk in column.chunks
    ):
        # An absent value has no code here; what stood in the dictionary for it is gone after this.
        column = column.cast(column.type.value_type)
    if not pa.types.is_dictionary(column.type):
        column = column.dictionary_encode()
    column = column.unify_dictionaries()
    if not column.num_chunks:
        return Cells(values=(), take=np.zeros(0, dtype=np.int64))
    dictionary = column.chunk(0).dictionary
    codes = np.concatenate(
        [
            pc.fill_null(chunk.indices.cast(pa.int64()), -1).to_numpy(zero_copy_only=False)
            for chunk in column.chunks
        ]
    )
    # A dictionary may hold what no row has; nobody sent that.
    used = np.bincount(codes + 1, minlength=len(dictionary) + 1) > 0
    values = made(dictionary.take(pa.array(np.flatnonzero(used[1:]))))
    number = np.cumsum(used[1:]) - 1
    take = np.where(codes < 0, len(values), number[codes] if len(number) else 0)
    odd = {place: value for place, value in enumerate(values) if isinstance(value, Odd)}
    shown = [None if isinstance(value, Odd) else value for value in values]
    if used[0]:
        shown.append(None)
    return Cells(values=shown, take=take, odd=odd)
