"""A large array of flat objects, read from JSON text in whole blocks.

Between two strings of such a text there is little: a colon, a comma, the end of one object and the
begin of the next, perhaps with a number or null. What stands there decides what the strings are.
All objects must be written in one style of white space; they may have different names.
"""

import re
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field
from typing import Final, NamedTuple

import numpy as np

from service.network.columns import BoolArray, CodeArray, IntArray
from service.network.files.json_arrays import NULL, SEPARATOR_BYTES_MAX, texts_of
from service.network.files.json_blocks import LEAD, Block
from service.network.files.json_digits import Digits, read_digits
from service.network.files.json_ends import value_end
from service.network.files.json_ids import Ids
from service.network.files.json_texts import DistinctTexts, TooManyDistinctError
from service.network.files.json_values import closing_bracket, skipped, skipped_back
from service.network.scanned import (
    FieldKind,
    Scanned,
    ScannedNumbers,
    ScannedRows,
    ScannedTexts,
)

BLOCK_BYTES: Final = 1 << 20

_QUOTE: Final = ord('"')
_OPEN: Final = ord("{")
_NO_TEXT: Final = -1
_NO_NAME: Final = b'""'
_STRING_OR_COMMA: Final = re.compile(rb'"[^"]*"|,')
_NEXT_ROW: Final = re.compile(rb'[ \t\n\r]*,[ \t\n\r]*\{[ \t\n\r]*(?=")')
_COLON: Final = re.compile(rb":[ \t\n\r]*")

Decode = Callable[[bytes], object]


class _OddRowsError(Exception):
    """The array holds something else than flat objects in one style."""


class _Style(NamedTuple):
    """What stands between name and value, value and name, and two objects.

    ``indent`` is the white space between the brace that opens an object and its first name.
    """

    colon: bytes
    comma: bytes
    next_row: bytes
    indent: int


@dataclass(slots=True)
class _Found:
    """What was found of one field: pieces of its column, and the row of each value."""

    kind: FieldKind
    rows: list[IntArray] = field(default_factory=list)
    digits: list[Digits] = field(default_factory=list)
    codes: list[CodeArray] = field(default_factory=list)
    distinct: DistinctTexts = field(default_factory=DistinctTexts)
    ids: Ids = field(default_factory=Ids)
    quoted: bool = False


class _Gaps(NamedTuple):
    """The strings of a block up to the end of its last whole object, and what follows each.

    ``opens`` and ``closes`` have one string more than there are gaps. ``name`` tells that the
    string names a value, ``text`` that its value is the string that follows, ``ends`` that an
    object ends behind it.
    """

    block: Block
    opens: IntArray
    closes: IntArray
    name: BoolArray
    text: BoolArray
    ends: BoolArray


def scan_rows(
    text: bytes,
    start: int,
    *,
    kinds: Mapping[str, FieldKind],
    decode: Decode,
    block_bytes: int = BLOCK_BYTES,
) -> tuple[ScannedRows, int] | None:
    """Return an array of objects as columns, and the place behind it.

    ``start`` is the place of its opening bracket. ``kinds`` are the names that values may have;
    ``decode`` reads one object exactly.
    """
    first = skipped(text, start + 1)
    close = closing_bracket(text, first, behind=b"}")
    if close < 0 or text.find(b"\\", first, close) >= 0:
        return None
    try:
        scan = _Scan(text, style=_style(text, first), kinds=kinds)
        return scan.rows(first, close, decode, block_bytes), close + 1
    except (_OddRowsError, TooManyDistinctError):
        return None


def _style(text: bytes, first: int) -> _Style:
    """Return the style in which the first two objects are written."""
    name = skipped(text, first + 1)
    end = value_end(text, first)
    if end is None or text[name : name + 1] != b'"':
        raise _OddRowsError
    colon = _COLON.match(text, text.find(b'"', name + 1) + 1)
    following = _NEXT_ROW.match(text, end)
    if colon is None or following is None:
        raise _OddRowsError
    comma = b","
    for found in _STRING_OR_COMMA.finditer(text, name, end):
        if found[0] == b",":
            comma = text[skipped_back(text, found.start()) : skipped(text, found.end())]
            break
    next_row = text[skipped_back(text, end - 1) : following.end()]
    if max(map(len, (colon[0], comma, next_row))) > SEPARATOR_BYTES_MAX or comma[:1] != b",":
        raise _OddRowsError
    return _Style(colon=colon[0], comma=comma, next_row=next_row, indent=name - first - 1)


class _Scan:
    """One reading of an array of objects."""

    def __init__(self, text: bytes, *, style: _Style, kinds: Mapping[str, FieldKind]) -> None:
        """Read objects written in ``style``, whose values have the names of ``kinds``."""
        self._text = text
        self._style = style
        self._kinds = kinds
        self._found: dict[str, _Found] = {}
        self._names = DistinctTexts()

    def rows(self, first: int, close: int, decode: Decode, block_bytes: int) -> ScannedRows:
        """Return the objects from ``first`` to the bracket at ``close`` as columns."""
        text, style = self._text, self._style
        end = skipped_back(text, close)
        if text[end - 1 : end] != b"}":
            raise _OddRowsError
        # Behind the last object stands what would follow if there were one more.
        behind = style.next_row[style.next_row.index(b"}") + 1 :] + _NO_NAME
        places: list[IntArray] = []
        rows = 0
        window = skipped(text, first + 1)
        while True:
            last = window + block_bytes >= end
            content = text[window:end] + behind if last else text[window : window + block_bytes]
            gaps = _gaps(content, style)
            if last and int(gaps.opens[-1]) - LEAD != len(content) - len(_NO_NAME):
                # A quote too many or too few somewhere: the last objects are none.
                raise _OddRowsError
            _check(gaps, style)
            last_strings = np.flatnonzero(gaps.ends)
            firsts = np.append(gaps.opens[:1], gaps.opens[last_strings[:-1] + 1])
            places.append(firsts + (window - LEAD))
            self._read(gaps, rows)
            rows += len(last_strings)
            if last:
                break
            window += int(gaps.opens[-1]) - LEAD
        objects = np.concatenate(places) - (style.indent + 1)
        return ScannedRows(
            rows=rows,
            columns={
                name: _column(part, rows, _sent(text, objects, decode, name))
                for name, part in self._found.items()
            },
        )

    def _read(self, gaps: _Gaps, row: int) -> None:
        """Read the values of a block, whose first object is number ``row``."""
        style = self._style
        places = np.flatnonzero(gaps.name)
        rows: IntArray = np.cumsum(gaps.ends) - gaps.ends
        for name, which in self._by_name(gaps, places, rows[places]):
            if name not in self._kinds:
                raise _OddRowsError
            own = self._found.setdefault(name, _Found(self._kinds[name]))
            here = places[which]
            at: IntArray = rows[here]
            if bool((at[1:] <= at[:-1]).any()):
                # One name twice in an object.
                raise _OddRowsError
            own.rows.append(at + row)
            text = gaps.text[here]
            behind = np.where(gaps.ends[here], len(style.next_row), len(style.comma))
            starts = gaps.closes[here] + (1 + len(style.colon))
            ends = np.where(text, gaps.closes[here + 1], gaps.opens[here + 1] - behind)
            # A text begins behind its quote, which follows the colon.
            _read_values(gaps.block, own, starts=starts + text, ends=ends, text=text)

    def _by_name(
        self, gaps: _Gaps, places: IntArray, rows: IntArray
    ) -> Iterator[tuple[str, IntArray | slice]]:
        """Yield each name that occurs, and which of ``places`` have it."""
        block, opens, closes = gaps.block, gaps.opens[places], gaps.closes[places]
        width = int(np.searchsorted(rows, rows[0], side="right"))
        content = block.data.tobytes()
        if len(rows) % width == 0 and bool((rows[::width] == rows[width - 1 :: width]).all()):
            heads = [content[opens[number] : closes[number] + 1] for number in range(width)]
            if all(block.holds(opens[number::width], head) for number, head in enumerate(heads)):
                # All objects have the same names in the same order.
                for number, head in enumerate(heads):
                    yield head[1:-1].decode("utf-8", "replace"), slice(number, None, width)
                return
        codes = self._names.codes(block, starts=opens + 1, ends=closes)
        if codes is None:
            raise _OddRowsError
        for code, name in enumerate(self._names.texts):
            which = np.flatnonzero(codes == code)
            if len(which):
                yield name.decode("utf-8", "replace"), which


def _sent(text: bytes, objects: IntArray, decode: Decode, name: str) -> Callable[[int], object]:
    """Return a function that finds the value of a name in an object again, None if it has none."""

    def sent(row: int) -> object:
        start = int(objects[row])
        value = decode(text[start : value_end(text, start)])
        assert isinstance(value, dict)  # noqa: S101 - it was read as one
        return value.get(name)

    return sent


def _gaps(content: bytes, style: _Style) -> _Gaps:
    """Return the strings of a block up to the end of its last whole object."""
    block = Block.of(content)
    data = block.data
    quotes = block.places(_QUOTE)
    closes = quotes[1::2]
    opens = quotes[0::2][: len(closes)]
    starts, ends = closes[:-1] + 1, opens[1:]
    name = data[starts] == style.colon[0]
    text = name & (ends - starts == len(style.colon))
    row_ends = (data[ends - 1 - style.indent] == _OPEN) & ~text
    whole = np.flatnonzero(row_ends)
    if len(whole) == 0:
        raise _OddRowsError
    count = int(whole[-1]) + 1
    return _Gaps(
        block=block,
        opens=opens[: count + 1],
        closes=closes[: count + 1],
        name=name[:count],
        text=text[:count],
        ends=row_ends[:count],
    )


def _check(gaps: _Gaps, style: _Style) -> None:
    """Raise ``_OddRowsError`` unless every gap is made of what its kind is made of."""
    starts, ends = gaps.closes[:-1] + 1, gaps.opens[1:]
    # A name or the text of a value precedes a name; only a name precedes a text.
    if not gaps.name[0] or not np.array_equal(gaps.name[1:], ~gaps.text[:-1]):
        raise _OddRowsError
    alone = ~gaps.name
    sizes = np.where(gaps.ends, len(style.next_row), len(style.comma))
    block = gaps.block
    sound = (
        block.holds(starts[gaps.name], style.colon)
        and block.holds(ends[gaps.ends] - len(style.next_row), style.next_row)
        and block.holds(ends[~gaps.ends & ~gaps.text] - len(style.comma), style.comma)
        and np.array_equal((ends - starts)[alone], sizes[alone])
    )
    if not sound:
        raise _OddRowsError


def _read_values(
    block: Block, own: _Found, *, starts: IntArray, ends: IntArray, text: BoolArray
) -> None:
    """Read the values from ``starts`` to ``ends``, of which those of ``text`` are quoted."""
    quoted = bool(text.any())
    if own.kind is FieldKind.NUMBER:
        digits = Digits.room(len(starts))
        sound = read_digits(block, starts=starts, ends=ends, into=digits)
        # The text "null" is no number.
        if not sound or (quoted and bool((digits.null & text).any())):
            raise _OddRowsError
        own.digits.append(digits)
        own.quoted |= quoted
        return
    codes = np.full(len(starts), _NO_TEXT, dtype=np.int32)
    if not text.all():
        others = starts[~text]
        if bool((ends[~text] - others != len(NULL)).any()) or not block.holds(others, NULL):
            raise _OddRowsError
        starts, ends = starts[text], ends[text]
    if own.kind is FieldKind.ID:
        # Rows without an id are left out here, as those without the name are.
        own.rows[-1] = own.rows[-1][text]
        if not own.ids.add(block, starts=starts, ends=ends):
            raise _OddRowsError
        return
    found = own.distinct.codes(block, starts=starts, ends=ends)
    if found is None:
        raise _OddRowsError
    codes[text] = found
    own.codes.append(codes)


def _column(own: _Found, rows: int, sent: Callable[[int], object]) -> Scanned:
    """Return one field as a column of so many rows."""
    places = np.concatenate(own.rows)
    if own.kind is FieldKind.ID:
        return own.ids.column(places, rows) if len(places) < rows else own.ids.column()
    if own.kind is FieldKind.NUMBER:
        digits = Digits.joined(own.digits)
        if not digits.fits:
            raise _OddRowsError
        if len(places) < rows:
            digits = digits.spread(places, rows)
        return ScannedNumbers(digits, quoted=own.quoted, sent=sent)
    values = texts_of(own.distinct)
    if values is None:
        raise _OddRowsError
    codes = np.concatenate(own.codes)
    if len(places) < rows:
        spread = np.full(rows, _NO_TEXT, dtype=np.int32)
        spread[places] = codes
        codes = spread
    if bool((codes == _NO_TEXT).any()):
        codes = np.where(codes == _NO_TEXT, np.int32(len(values)), codes)
        return ScannedTexts((*values, None), codes)
    return ScannedTexts(values, codes)
