"""Large arrays of numbers, of texts, and of rows of numbers, read from JSON text in whole blocks.

Only arrays that are surely what they seem are read: their values in one spelling, parted by commas
with the same white space everywhere. For every other the answer is None.
"""

import re
from collections.abc import Iterator
from typing import Final, NamedTuple

import numpy as np

from service.network.columns import CodeArray, IntArray
from service.network.files.json_blocks import LEAD, Block
from service.network.files.json_digits import Digits, read_digits
from service.network.files.json_ids import Ids
from service.network.files.json_texts import DistinctTexts, TooManyDistinctError
from service.network.files.json_values import SPACE, Number, is_plain_text, skipped, skipped_back
from service.network.scanned import ScannedGrid, ScannedIds, ScannedNumbers, ScannedTexts

# As many bytes as the second cache of a core holds together with the words made of them.
BLOCK_BYTES: Final = 1 << 17

_COMMA: Final = re.compile(rb"[ \t\n\r]*,[ \t\n\r]*")
_BETWEEN_ROWS: Final = re.compile(rb"[ \t\n\r]*,[ \t\n\r]*\[")
SEPARATOR_BYTES_MAX: Final = 64
NULL: Final = b"null"
_QUOTE: Final = ord('"')
_COMMA_BYTE: Final = ord(",")


class _Tokens:
    """Numbers parted by commas alone, any of which can be shown as it was sent."""

    def __init__(self, tokens: bytes) -> None:
        self._tokens = tokens
        self._ends: IntArray | None = None

    def __call__(self, position: int) -> Number | None:
        """Return the number at ``position``, None for null."""
        if self._ends is None:
            self._ends = np.append(_marks(self._tokens, _COMMA_BYTE), len(self._tokens))
        start = int(self._ends[position - 1]) + 1 if position else 0
        text = self._tokens[start : int(self._ends[position])]
        return None if text == NULL else Number(text.decode("ascii"))


def scan_numbers(
    text: bytes, start: int, end: int, *, block_bytes: int = BLOCK_BYTES
) -> ScannedNumbers | None:
    """Return the numbers between the brackets of an array, which are at ``start`` and ``end``."""
    return _numbers(_tight(text[start:end]), block_bytes)


def scan_grid(
    text: bytes, start: int, *, block_bytes: int = BLOCK_BYTES
) -> tuple[ScannedGrid, int] | None:
    """Return an array of arrays of numbers, equally long, and where it ends.

    ``start`` is behind the opening bracket of the first inner array.
    """
    rows: list[bytes] = []
    width = -1
    while True:
        end = text.find(b"]", start)
        if end < 0:
            return None
        row = _tight(text[start:end])
        commas = row.count(b",")
        if width not in (-1, commas):
            return None
        width = commas
        rows.append(row)
        another = _BETWEEN_ROWS.match(text, end + 1)
        if another is None:
            break
        start = another.end()
    close = skipped(text, end + 1)
    if text[close : close + 1] != b"]":
        return None
    numbers = _numbers(b",".join(rows), block_bytes)
    if numbers is None:
        return None
    return ScannedGrid(numbers, height=len(rows), width=width + 1), close + 1


def _tight(tokens: bytes) -> bytes:
    """Return tokens without the white space around and behind commas, where it is even."""
    tokens = tokens.strip(SPACE)
    comma = _COMMA.search(tokens)
    if comma is not None and len(comma[0]) > 1:
        # What this leaves over is no number, and so is found.
        tokens = tokens.replace(comma[0], b",")
    return tokens


def _numbers(tokens: bytes, block_bytes: int) -> ScannedNumbers | None:
    """Return the numbers that are parted by nothing but commas."""
    digits = Digits.room(tokens.count(b",") + 1)
    # One comma more, so that every number has one behind it.
    content = tokens + b","
    start = at = 0
    while start < len(content):
        end = content.rfind(b",", start, start + block_bytes) + 1
        if end == 0:
            return None
        block = Block.of(content[start:end])
        ends = block.places(_COMMA_BYTE)
        starts = np.empty_like(ends)
        starts[0] = LEAD
        starts[1:] = ends[:-1] + 1
        if not read_digits(block, starts=starts, ends=ends, into=digits.part(at, len(ends))):
            return None
        at += len(ends)
        start = end
    if not digits.fits:
        return None
    return ScannedNumbers(digits, quoted=False, sent=_Tokens(tokens))


class _Quoted:
    """Strings and nulls of an array, any of which can be shown as it was sent."""

    def __init__(self, content: bytes, nulls_before: IntArray | None) -> None:
        self._content = content
        self._nulls_before = nulls_before
        self._quotes: IntArray | None = None
        self._places: IntArray | None = None

    def __call__(self, position: int) -> str | None:
        """Return the text at ``position``, None for null."""
        if self._quotes is None:
            self._quotes = _marks(self._content, _QUOTE)
            if self._nulls_before is not None:
                self._places = _places(self._nulls_before)
        string = position
        if self._places is not None:
            string = int(np.searchsorted(self._places, position))
            if string == len(self._places) or self._places[string] != position:
                return None
        start, end = self._quotes[2 * string], self._quotes[2 * string + 1]
        return self._content[int(start) + 1 : int(end)].decode()


class _Strings(NamedTuple):
    """Some strings of an array that follow each other, with the nulls before each of them.

    ``starts`` and ``ends`` are those of their contents in ``block``. What has no string at its end
    are the nulls behind the last one: the only element of ``nulls_before``.
    """

    block: Block
    starts: IntArray
    ends: IntArray
    nulls_before: IntArray


class _OddArrayError(Exception):
    """An array holds something else than strings and nulls, or parts them unevenly."""


def scan_texts(
    text: bytes, start: int, end: int, *, block_bytes: int = BLOCK_BYTES
) -> ScannedTexts | None:
    """Return the strings and nulls between the brackets of an array at ``start`` and ``end``."""
    distinct = DistinctTexts()
    codes: list[CodeArray] = []
    nulls: list[IntArray] = []
    try:
        for strings in _strings(text, start, end, block_bytes):
            nulls.append(strings.nulls_before)
            found = distinct.codes(strings.block, starts=strings.starts, ends=strings.ends)
            if found is None:
                return None
            codes.append(found)
    except (_OddArrayError, TooManyDistinctError):
        return None
    values = texts_of(distinct)
    if values is None:
        return None
    before = np.concatenate(nulls)
    found = np.concatenate(codes)
    if not before.any():
        return ScannedTexts(values, found)
    spread = np.full(len(found) + int(before.sum()), len(values), dtype=np.int32)
    spread[_places(before)[:-1]] = found
    return ScannedTexts((*values, None), spread)


def scan_ids(
    text: bytes, start: int, end: int, *, block_bytes: int = BLOCK_BYTES
) -> ScannedIds | None:
    """Return the ids and nulls between the brackets of an array at ``start`` and ``end``."""
    ids = Ids()
    nulls: list[IntArray] = []
    try:
        for strings in _strings(text, start, end, block_bytes):
            nulls.append(strings.nulls_before)
            if not ids.add(strings.block, starts=strings.starts, ends=strings.ends):
                return None
    except _OddArrayError:
        return None
    before = np.concatenate(nulls)
    if not before.any():
        return ids.column()
    return ids.column(_places(before)[:-1], len(before) - 1 + int(before.sum()))


def scan_quoted_numbers(
    text: bytes, start: int, end: int, *, block_bytes: int = BLOCK_BYTES
) -> ScannedNumbers | None:
    """Return the numbers between the brackets of an array, each of which was sent as text."""
    pieces: list[Digits] = []
    nulls: list[IntArray] = []
    try:
        for strings in _strings(text, start, end, block_bytes):
            nulls.append(strings.nulls_before)
            piece = Digits.room(len(strings.starts))
            starts, ends = strings.starts, strings.ends
            if not read_digits(strings.block, starts=starts, ends=ends, into=piece):
                return None
            pieces.append(piece)
    except _OddArrayError:
        return None
    digits = Digits.joined(pieces)
    before = np.concatenate(nulls)
    if not digits.fits or digits.null.any():
        # The text "null" is no number.
        return None
    if before.any():
        digits = digits.spread(_places(before)[:-1], len(digits.values) + int(before.sum()))
    sent = _Quoted(text[start:end], before if before.any() else None)
    return ScannedNumbers(digits, quoted=True, sent=sent)


def texts_of(distinct: DistinctTexts) -> tuple[str, ...] | None:
    """Return the distinct texts, None if one is not what a JSON string can hold without escapes."""
    try:
        values = tuple(text.decode() for text in distinct.texts)
    except UnicodeDecodeError:
        return None
    return values if all(map(is_plain_text, values)) else None


def _strings(text: bytes, start: int, end: int, block_bytes: int) -> Iterator[_Strings]:
    """Yield the strings of an array, block by block; raise ``_OddArrayError`` if it is odd.

    With a separator before the first value and behind the last, every gap between strings is a
    separator, and then as many times null and a separator as there are nulls.
    """
    start, end = skipped(text, start), skipped_back(text, end)
    separator = _separator(text, start)
    gap = separator
    window = former = start
    while window < end:
        stop = min(window + block_bytes, end)
        block = Block.of(text[window:stop])
        shift = window - LEAD
        quotes = block.places(_QUOTE)
        window = stop
        if len(quotes) % 2:
            # The last string goes on in the next block.
            window = int(quotes[-1]) + shift
            quotes = quotes[:-1]
            if len(quotes) == 0 and stop < end and window == shift + LEAD:
                raise _OddArrayError
        opens, closes = quotes[0::2], quotes[1::2]
        if len(opens):
            gap += text[former : int(opens[0]) + shift]
            first = np.array([_nulls_in(gap, separator)], dtype=np.int64)
            others = _nulls_between(block, closes[:-1] + 1, opens[1:], separator)
            yield _Strings(block, opens + 1, closes, np.concatenate((first, others)))
            gap, former = b"", int(closes[-1]) + 1 + shift
        elif stop == end and window < end:
            raise _OddArrayError
    nowhere = np.zeros(0, dtype=np.int64)
    tail = _nulls_in(gap + text[former:end] + separator, separator)
    yield _Strings(Block.of(b""), nowhere, nowhere, np.array([tail], dtype=np.int64))


def _separator(text: bytes, start: int) -> bytes:
    """Return what parts the first two values of an array, a comma where there are no two."""
    if text[start : start + 1] == b'"':
        found = _COMMA.match(text, text.find(b'"', start + 1) + 1)
    else:
        found = _COMMA.match(text, start + len(NULL))
    separator = b"," if found is None else found[0]
    if len(separator) > SEPARATOR_BYTES_MAX:
        raise _OddArrayError
    return separator


def _nulls_in(gap: bytes, separator: bytes) -> int:
    """Return how many nulls stand in a gap between two strings."""
    size = len(NULL) + len(separator)
    nulls = (len(gap) - len(separator)) // size
    if gap != separator + (NULL + separator) * nulls:
        raise _OddArrayError
    return nulls


def _nulls_between(block: Block, starts: IntArray, ends: IntArray, separator: bytes) -> IntArray:
    """Return how many nulls stand in each of the gaps from ``starts`` to ``ends``."""
    sizes = ends - starts
    if bool((sizes == len(separator)).all()):
        if not block.holds(starts, separator):
            raise _OddArrayError
        return np.zeros(len(starts), dtype=np.int64)
    template = np.frombuffer(separator + NULL, dtype=np.uint8)
    nulls, rest = np.divmod(sizes - len(separator), len(template))
    if bool((rest != 0).any()) or int(nulls.min()) < 0:
        raise _OddArrayError
    offsets = np.arange(int(sizes.sum())) - np.repeat(np.cumsum(sizes) - sizes, sizes)
    content = block.data[np.repeat(starts, sizes) + offsets]
    if not np.array_equal(content, template[offsets % len(template)]):
        raise _OddArrayError
    return nulls


def _places(nulls_before: IntArray) -> IntArray:
    """Return in which row each string stands."""
    return np.arange(len(nulls_before)) + np.cumsum(nulls_before)


def _marks(content: bytes, mark: int) -> IntArray:
    """Return where a byte occurs."""
    return np.flatnonzero(np.frombuffer(content, dtype=np.uint8) == mark)
