"""The large tables of a network in JSON text: found, read by array operations, and cut out.

What is left of the text is small and goes to the exact reader. Whatever here is in doubt stays in
the text, so that the exact reader finds every fault and says it in its words.
"""

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Final

from service.network.files.json_arrays import (
    scan_grid,
    scan_ids,
    scan_numbers,
    scan_quoted_numbers,
    scan_texts,
)
from service.network.files.json_ends import string_end, value_end
from service.network.files.json_rows import Decode, scan_rows
from service.network.files.json_values import closing_bracket, skipped
from service.network.scanned import FieldKind, Scanned, ScannedGrid, ScannedRows

# Below, the exact reader is done before the arrays are set up.
LARGE_BYTES: Final = 1 << 13
# A longer element of an array is no row, but a cost table.
_ROW_BYTES_MAX: Final = 1 << 13

Kinds = Mapping[str, FieldKind]
"""The fields of a table whose values are texts or numbers."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Cut:
    """A value that was cut out of a text, and the path of names and positions to it."""

    path: tuple[str | int, ...]
    value: Scanned | ScannedGrid | ScannedRows


class _OddTextError(Exception):
    """The text is not JSON, or spells a name with escapes."""


def cut_tables(
    text: bytes, tables: Mapping[str, Kinds], decode: Decode, *, large_bytes: int = LARGE_BYTES
) -> tuple[bytes, tuple[Cut, ...]]:
    """Return ``text`` with its large arrays emptied, and what was in them.

    ``tables`` are the names of tables among the members of the outermost object. The text that is
    left is as deep as the whole; where nothing was cut out it is ``text`` itself.
    """
    cutter = _Cutter(text, decode, large_bytes)
    try:
        cutter.document(tables)
    except _OddTextError:
        return text, ()
    return cutter.rest(), tuple(cutter.cuts)


class _Cutter:
    """One walk over a text, from its begin to its end."""

    def __init__(self, text: bytes, decode: Decode, large_bytes: int) -> None:
        """Begin with nothing cut out."""
        self._large_bytes = large_bytes
        self.cuts: list[Cut] = []
        self._text = text
        self._decode = decode
        self._pieces: list[bytes] = []
        self._kept = 0

    def rest(self) -> bytes:
        """Return the text with the cuts filled by empty arrays."""
        if not self.cuts:
            return self._text
        return b"".join((*self._pieces, self._text[self._kept :]))

    def document(self, tables: Mapping[str, Kinds]) -> None:
        """Walk over the outermost object."""

        def visit(name: str, place: int) -> int:
            kinds = tables.get(name)
            return self._end(place) if kinds is None else self._table(name, place, kinds)

        place = skipped(self._text, 0)
        if self._text[place : place + 1] != b"{":
            raise _OddTextError
        self._members(place, visit)

    def _members(self, place: int, visit: Callable[[str, int], int]) -> int:
        """Walk over an object; ``visit`` returns where the value of a name ends."""
        text = self._text
        place = skipped(text, place + 1)
        if text[place : place + 1] == b"}":
            return place + 1
        while True:
            end = string_end(text, place) if text[place : place + 1] == b'"' else None
            if end is None or b"\\" in text[place:end]:
                raise _OddTextError
            name = text[place + 1 : end - 1].decode("utf-8", "replace")
            place = skipped(text, end)
            if text[place : place + 1] != b":":
                raise _OddTextError
            place = skipped(text, visit(name, skipped(text, place + 1)))
            if text[place : place + 1] == b"}":
                return place + 1
            if text[place : place + 1] != b",":
                raise _OddTextError
            place = skipped(text, place + 1)

    def _table(self, name: str, place: int, kinds: Kinds) -> int:
        """Walk over a table in any of its forms."""
        text = self._text
        end = value_end(text, place, within=self._large_bytes)
        if end is not None:
            return end
        if text[place : place + 1] == b"{":
            return self._columns((name,), place, kinds)
        first = skipped(text, place + 1)
        if text[place : place + 1] != b"[" or text[first : first + 1] != b"{":
            return self._end(place)
        end = value_end(text, first, within=_ROW_BYTES_MAX)
        if end is None or b'"destinations"' in text[first:end]:
            return self._cost_tables(name, first, kinds)
        scanned = scan_rows(text, place, kinds=kinds, decode=self._decode)
        if scanned is None:
            return self._end(place)
        return self._cut((name,), place, scanned[1], scanned[0], filler=b"[{}]")

    def _cost_tables(self, name: str, place: int, kinds: Kinds) -> int:
        """Walk over an array of cost tables, the first of which is at ``place``."""
        text = self._text
        number = 0
        while True:
            is_table = text[place : place + 1] == b"{"
            end = self._columns((name, number), place, kinds) if is_table else self._end(place)
            place = skipped(text, end)
            if text[place : place + 1] != b",":
                return place + 1
            place = skipped(text, place + 1)
            number += 1

    def _columns(self, path: tuple[str | int, ...], place: int, kinds: Kinds) -> int:
        """Walk over an object of columns, or a cost table."""

        def visit(field: str, start: int) -> int:
            return self._column((*path, field), start, kinds.get(field))

        return self._members(place, visit)

    def _column(self, path: tuple[str | int, ...], place: int, kind: FieldKind | None) -> int:
        """Cut out one array, if it is large, of a known kind, and free of doubt."""
        text = self._text
        end = value_end(text, place, within=self._large_bytes)
        if end is not None:
            return end
        if kind is None or text[place : place + 1] != b"[":
            return self._end(place)
        start = skipped(text, place + 1)
        if kind is FieldKind.NUMBER and text[start : start + 1] == b"[":
            grid = scan_grid(text, start + 1)
            if grid is not None:
                return self._cut(path, place, grid[1], grid[0], filler=b"[[]]")
            return self._end(place)
        # Behind a string, a digit, or null.
        scanned: Scanned | None = None
        close = closing_bracket(text, start, behind=b'"0123456789l')
        if close >= 0 and text.find(b"\\", start, close) < 0:
            if kind is FieldKind.TEXT:
                scanned = scan_texts(text, start, close)
            elif kind is FieldKind.ID:
                scanned = scan_ids(text, start, close)
            elif text.find(b'"', start, close) < 0:
                scanned = scan_numbers(text, start, close)
            else:
                scanned = scan_quoted_numbers(text, start, close)
        if scanned is None:
            return self._end(place)
        return self._cut(path, place, close + 1, scanned, filler=b"[]")

    def _cut(
        self,
        path: tuple[str | int, ...],
        start: int,
        end: int,
        value: Scanned | ScannedGrid | ScannedRows,
        *,
        filler: bytes,
    ) -> int:
        """Put ``filler`` in the place of a value."""
        self._pieces += (self._text[self._kept : start], filler)
        self._kept = end
        self.cuts.append(Cut(path=path, value=value))
        return end

    def _end(self, place: int) -> int:
        """Return where the value at ``place`` ends."""
        end = value_end(self._text, place)
        if end is None:
            raise _OddTextError
        return end
