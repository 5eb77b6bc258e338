"""The byte form of every kind of column, over which its digest is taken; little endian throughout.

The kinds: ``code`` and ``small`` are int32 a row; ``text`` is a u32 length and UTF-8 a row;
``texts`` is a dictionary and int32 codes; ``decimal`` is int64 a row and, where some are absent, a
bitmap. Readers trust nothing: what no writer of ours produces raises ``NormalFormError``.
"""

import itertools
import struct
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from service.network.columns import BoolArray, CodeArray, Decimals, IdArray, IntArray, Texts

Kind = Literal["code", "small", "text", "texts", "decimal"]
# Bytes that may still be those of the array they are of.
Octets = bytes | memoryview

# Scaled values stay below it, as ``quantities`` reads them, so that sums of two fit int64.
SCALED_MAX = 2**62
# The most decimals that any column of the network definition may have (rates, money, weights).
EXPONENT_MAX = 6
# An id has 1 to 64 characters, and UTF-8 spends at most four bytes on each.
ID_BYTES_MAX = 256
# Rows that are turned between records and matrix at a time; bounds the extra memory to 17 MB.
_ROWS_AT_A_TIME = 65_536


class NormalFormError(ValueError):
    """Bytes, or a network, that are not in normal form."""


@dataclass(frozen=True, slots=True, kw_only=True)
class ColumnForm:
    """How one column is stored: the file name and the field of its table, and its kind.

    ``of`` says whose positions a code column holds; a ``required`` one has a value in every row.
    """

    name: str
    field: str
    kind: Kind
    of: Literal["sites", "items"] | None = None
    required: bool = False


def _form(name: str, kind: Kind, *, field: str | None = None, required: bool = False) -> ColumnForm:
    return ColumnForm(name=name, field=field or name, kind=kind, required=required)


_SITE = ColumnForm(name="site", field="site", kind="code", of="sites", required=True)
_ITEM = ColumnForm(name="item", field="item", kind="code", of="items", required=True)

SUPPLY_FORMS = (
    _SITE,
    _ITEM,
    _form("quantity", "decimal", required=True),
    _form("unit", "texts", required=True),
    *(_form(name, "decimal") for name in ("unit_cost", "on_hand", "reserved", "on_hold")),
    *(_form(name, "texts") for name in ("currency", "as_of", "lot", "best_before")),
    _form("available_from", "texts"),
    _form("keep_quantity", "decimal"),
    _form("keep_priority", "small"),
    _form("extra", "texts"),
)
DEMAND_FORMS = (
    _form("reference", "text", required=True),
    _form("order", "texts"),
    _form("ordered_at", "texts"),
    _SITE,
    _ITEM,
    _form("quantity", "decimal", required=True),
    _form("unit", "texts", required=True),
    _form("priority", "small"),
    _form("shortage_cost", "decimal"),
    _form("worth_at_most", "decimal"),
    *(_form(name, "texts") for name in ("earliest", "due", "latest")),
    _form("late_cost_per_day", "decimal"),
    *(_form(name, "texts") for name in ("origins", "tags", "extra")),
)
LANE_FORMS = (
    _form("id", "text", field="ids"),
    ColumnForm(name="origin", field="origin", kind="code", of="sites", required=True),
    ColumnForm(name="destination", field="destination", kind="code", of="sites", required=True),
    ColumnForm(name="item", field="item", kind="code", of="items"),
    _form("unit_cost", "decimal"),
    _form("measure", "texts", required=True),
    _form("must_ship", "decimal"),
    _form("capacity", "decimal"),
    *(_form(name, "texts") for name in ("per", "carrier", "currency", "charges", "tariff")),
    _form("transit_days", "decimal"),
    *(_form(name, "texts") for name in ("closes", "departs", "arrives", "tags", "extra")),
)
TABLE_FORMS = {"demand": DEMAND_FORMS, "lanes": LANE_FORMS, "supply": SUPPLY_FORMS}


def code_bytes(codes: CodeArray) -> Octets:
    """Return int32 little endian."""
    return _octets(codes, "<i4")


def code_column(data: Octets, rows: int) -> CodeArray:
    """Return the int32 of each row; their range is the caller's to check."""
    if len(data) != 4 * rows:
        raise NormalFormError(f"{len(data)} bytes do not hold {rows} codes")
    return np.frombuffer(data, dtype="<i4").astype(np.int32)


def decimal_bytes(column: Decimals) -> Octets:
    """Return int64 little endian, and a bitmap of the absent rows when there are any."""
    data = _octets(column.values, "<i8")
    if bool(column.present.all()):
        return data
    return b"".join((data, np.packbits(~column.present, bitorder="little").tobytes()))


def _octets(values: IntArray | CodeArray, kind: str) -> Octets:
    """Return the bytes of numbers, which are not copied where they are in that form already."""
    array = np.ascontiguousarray(values, dtype=kind)
    # A view of no bytes cannot be made.
    return array.data.cast("B") if len(array) else b""


def decimal_column(data: Octets, rows: int, *, exponent: int, nulls: bool) -> Decimals:
    """Return the decimals of each row, with the least exponent that makes them whole."""
    bitmap = (rows + 7) // 8 if nulls else 0
    if len(data) != 8 * rows + bitmap:
        raise NormalFormError(f"{len(data)} bytes do not hold {rows} decimals")
    values = np.frombuffer(data, dtype="<i8", count=rows).astype(np.int64)
    present = np.ones(rows, dtype=np.bool_)
    if nulls:
        bits = np.unpackbits(
            np.frombuffer(data, dtype=np.uint8, offset=8 * rows), bitorder="little"
        )
        present = bits[:rows] == 0
        if bits[rows:].any() or values[~present].any():
            raise NormalFormError("an absent decimal holds a value")
        if present.all() or not present.any():
            raise NormalFormError("the bitmap of absent decimals is not needed")
    if values.max(initial=0) >= SCALED_MAX or values.min(initial=0) <= -SCALED_MAX:
        raise NormalFormError("a decimal is out of range")
    if not 0 <= exponent <= EXPONENT_MAX or (exponent_and_values(values, exponent)[0] != exponent):
        raise NormalFormError("the exponent is not the least one")
    return Decimals(values=values, present=present, exponent=exponent)


def texts_bytes(column: Texts) -> bytes:
    """Return the count, each value with its length, and int32 codes."""
    pieces: list[Octets] = [struct.pack("<I", len(column.values))]
    for value in column.values:
        encoded = value.encode()
        pieces += (struct.pack("<I", len(encoded)), encoded)
    pieces.append(code_bytes(column.codes))
    return b"".join(pieces)


def texts_column(data: Octets, rows: int) -> Texts:
    """Return the codes and values; the values are distinct, sorted and all used."""
    if len(data) < 4:
        raise NormalFormError("a column of texts has no count")
    (count,) = struct.unpack_from("<I", data)
    # Every value is used by a row, so that a longer list cannot be in normal form.
    if not 1 <= count <= rows:
        raise NormalFormError("a column of texts has more values than rows")
    values = []
    place = 4
    for _ in range(count):
        start, place = _record(data, place)
        values.append(_decoded(data[start:place]))
    if any(former >= latter for former, latter in itertools.pairwise(values)):
        raise NormalFormError("the values of a column of texts are not sorted and distinct")
    codes = code_column(data[place:], rows)
    if int(codes.min()) < -1 or int(codes.max()) >= count:
        raise NormalFormError("a code of a text is out of range")
    # One value is used by whoever is not -1; to count a million codes takes far longer.
    used = [codes.max() == 0] if count == 1 else np.bincount(codes + 1, minlength=count + 1)[1:]
    if not all(used):
        raise NormalFormError("a value of a column of texts is not used")
    return Texts(codes=codes, values=tuple(values))


def text_bytes(column: IdArray) -> bytes:
    """Return a u32 length and the bytes of each row."""
    width = column.dtype.itemsize
    pieces = []
    for first in range(0, len(column), _ROWS_AT_A_TIME):
        part = np.ascontiguousarray(column[first : first + _ROWS_AT_A_TIME])
        lengths = np.strings.str_len(part)
        records = np.empty((len(part), 4 + width), dtype=np.uint8)
        records[:, :4] = lengths.astype("<u4").view(np.uint8).reshape(-1, 4)
        records[:, 4:] = part.view(np.uint8).reshape(-1, width)
        pieces.append(records[np.arange(4 + width) < 4 + lengths[:, None]].tobytes())
    return b"".join(pieces)


def text_column(data: Octets, rows: int) -> IdArray:
    """Return the bytes of each row; each is whole UTF-8 of at most ``ID_BYTES_MAX`` bytes."""
    places = _places(data, rows)
    starts, ends = places if places is not None else _places_one_by_one(data, rows)
    width = max(1, int((ends - starts).max(initial=0)))
    octets = np.frombuffer(data, dtype=np.uint8)
    column = np.zeros(rows, dtype=f"S{width}")
    for first in range(0, rows, _ROWS_AT_A_TIME):
        here = starts[first : first + _ROWS_AT_A_TIME, None] + np.arange(width)
        inside = here < ends[first : first + _ROWS_AT_A_TIME, None]
        block = np.where(inside, octets[np.minimum(here, len(octets) - 1)], np.uint8(0))
        _check_text(block, inside)
        column[first : first + _ROWS_AT_A_TIME] = block.view(f"S{width}").ravel()
    return column


def _places(data: Octets, rows: int) -> tuple[IntArray, IntArray] | None:
    """Return where each text starts and ends, None unless all have 1 to 255 bytes.

    Such a text has no byte of 0, and the length before it ends with three of them.
    """
    octets = np.frombuffer(data, dtype=np.uint8)
    zeros = np.flatnonzero(octets == 0)
    if len(zeros) != 3 * rows:
        return None
    lengths_at = zeros[::3] - 1
    if rows == 0 or int(lengths_at[0]) != 0:
        return None
    starts = lengths_at + 4
    ends = starts + octets[lengths_at]
    chained = (
        bool((zeros[1::3] == zeros[::3] + 1).all())
        and bool((zeros[2::3] == zeros[::3] + 2).all())
        and bool((ends[:-1] == lengths_at[1:]).all())
    )
    return (starts, ends) if chained and int(ends[-1]) == len(octets) else None


def _places_one_by_one(data: Octets, rows: int) -> tuple[IntArray, IntArray]:
    """Return where each text starts and ends."""
    starts = np.empty(rows, dtype=np.int64)
    ends = np.empty(rows, dtype=np.int64)
    place = 0
    for row in range(rows):
        starts[row], place = start, end = _record(data, place)
        ends[row] = end
        if end - start > ID_BYTES_MAX:
            raise NormalFormError("an id is too long")
    if place != len(data):
        raise NormalFormError("bytes are left over after the last text")
    return starts, ends


def _check_text(block: NDArray[np.uint8], inside: BoolArray) -> None:
    """Raise unless each row of ``block`` is UTF-8 without control characters."""
    content = block[inside]
    # Each row is UTF-8 if all together are and no row begins in the middle of a character.
    if bool((content < 0x20).any()) or bool(((block[:, 0] & 0xC0) == 0x80).any()):
        raise NormalFormError("an id has a control character")
    _decoded(content.tobytes())


def _record(data: Octets, place: int) -> tuple[int, int]:
    """Return where the text of the record at ``place`` starts and ends."""
    start = place + 4
    if start > len(data):
        raise NormalFormError("a text is cut off")
    end = start + int.from_bytes(data[place:start], "little")
    if end > len(data):
        raise NormalFormError("a text is cut off")
    return start, end


def _decoded(data: Octets) -> str:
    """Return the text of UTF-8 bytes."""
    try:
        return str(data, "utf-8")
    except UnicodeDecodeError as error:
        raise NormalFormError("a text is not UTF-8") from error


def exponent_and_values(values: IntArray, exponent: int) -> tuple[int, IntArray]:
    """Return the least exponent of ``values / 10**exponent`` and the values that belong to it."""
    # A few values mostly show that there is nothing to do.
    while exponent > 0 and not (values[:1024] % 10).any() and not (values % 10).any():
        values = values // 10
        exponent -= 1
    return exponent, values
