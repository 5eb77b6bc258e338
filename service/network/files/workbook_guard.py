"""A workbook judged before it is read: its size, and cells that its reader would pass over.

The reader (calamine) lays every sheet out as a full rectangle in memory, writes a text out in every
cell that shares it, and returns nothing for a cell with an error or a formula that was never
computed. So the bytes of each sheet are looked through first, streamed: how far it really reaches,
how much text it comes to, and where such cells are.
"""

import re
import zipfile
from collections.abc import Collection, Iterator, Mapping
from pathlib import Path
from typing import Final

import numpy as np

from service.network.columns import IntArray
from service.network.faults import Odd
from service.network.files.zips import Allowance, HostileZipError, opened, pieces

# A sheet with every row that a workbook can have, and 16 columns.
AREA_MAX: Final = 16 * (1 << 20)
# What the texts of all cells may come to, one that cells share counted for each of them.
TEXT_BYTES_MAX: Final = 1 << 30
# No cell is so long; what goes on without the end of one is not about cells.
_CARRIED_BYTES_MAX: Final = 4 << 20
_SHARED: Final = "xl/sharedStrings.xml"
_PREFIX: Final = rb"(?:[\w.-]+:)?"
# How nearly all programs write a cell that holds something, and how any may write rows and cells.
_USUAL: Final = re.compile(rb'<c r="([A-Z]{1,3})([0-9]{1,7})"[^>/]*>')
_UNUSUAL: Final = (b"'", b":c", b":row", b"<c>", b"<c/", b"<c\n", b"<c\r", b"<c\t", b"<row\n")
_TAG: Final = re.compile(rb"<" + _PREFIX + rb"(c|row)(?=[\s/>])([^>]*)>")
_PLACES: Final = re.compile(rb"""(?<![^\s"'])r\s*=\s*(?:"([^"]*)"|'([^']*)')""")
_PLACE: Final = re.compile(rb"\s*([A-Za-z]{0,3})([0-9]{1,7})\s*")
_CELL: Final = re.compile(
    rb"<%(p)sc\b([^>/]*)>((?:(?!</%(p)sc>).)*)</%(p)sc>" % {b"p": _PREFIX}, re.DOTALL
)
_REFERENCE: Final = re.compile(rb"""\br\s*=\s*["']([A-Za-z]{1,3})([0-9]{1,7})["']""")
_ERROR: Final = re.compile(rb"""\bt\s*=\s*["']e["']""")
_FORMULA: Final = re.compile(rb"<" + _PREFIX + rb"f\b")
_VALUE: Final = re.compile(rb"<" + _PREFIX + rb"v(?:\s[^>]*)?>([^<]+)<")
_SHARED_CELL: Final = re.compile(rb"""\bt\s*=\s*["']s["']""")
_SHARED_VALUE: Final = re.compile(
    _SHARED_CELL.pattern + rb"[^>]*>\s*<" + _PREFIX + rb"v>([0-9]{1,9})<"
)
_ITEM: Final = re.compile(rb"<%(p)ssi\b(?:[^>]*/>|.*?</%(p)ssi>)" % {b"p": _PREFIX}, re.DOTALL)
_ERROR_ADVICE: Final = "This cell holds an error. Mend the formula, or write a value."
_UNCOMPUTED_ADVICE: Final = (
    "This formula was never computed: the program that wrote it does not. Open the workbook in a "
    "spreadsheet program and save it, or write a value."
)
_TOO_LARGE_ADVICE: Final = (
    "A sheet reaches too far: see its last row and column that hold anything. Large tables go into "
    "CSV or Parquet files."
)

_HIDDEN_ADVICE: Final = (
    "A row or a cell says in an unknown way where it stands. Open the workbook in a spreadsheet "
    "program and save it."
)

OddCells = Mapping[tuple[int, int], Odd]


def look_through(
    path: Path, allowance: Allowance, sheets: Collection[str]
) -> Mapping[str, OddCells]:
    """Return the odd cells of every sheet by (row, column) from 0, by its part of the zip.

    ``sheets`` are the parts that the workbook names as sheets. Raises ``HostileZipError`` and
    ``TooLargeError``.
    """
    with opened(path) as archive:
        # The reader finds parts in any case, and may resolve a path as we do not.
        last = {_last(name) for name in sheets}
        found: dict[str, OddCells] = {}
        shared: dict[str, int] = {}
        for name in archive.namelist():
            if name == _SHARED:
                continue
            if _last(name) not in last:
                # Unpacked for nothing but to see that it is no bomb: the reader does not count.
                for _ in pieces(archive, name, allowance):
                    pass
                continue
            look = _Look()
            for piece in _whole_cells(pieces(archive, name, allowance)):
                look.at(piece)
            found[name] = look.odd
            shared[name] = look.shared
        if _SHARED in archive.namelist():
            lengths = _shared_lengths(archive, allowance)
            _judge_texts(archive, shared, lengths)
        return found


class _Look:
    """What was seen of one part so far."""

    def __init__(self) -> None:
        """Begin with nothing seen."""
        self.odd: dict[tuple[int, int], Odd] = {}
        self.shared = 0
        # How far the cells reach, and the place of the last one; from 1, as sheets count.
        self._rows = self._columns = 0
        self._row = self._column = 0

    def at(self, piece: bytes) -> None:
        """Look at some whole cells."""
        if b"\0" in piece:
            # Text of two bytes a character, in which no pattern here finds anything.
            raise HostileZipError("broken_workbook", _HIDDEN_ADVICE)
        places = piece.count(b'<c r="')
        usual = (
            places == piece.count(b"<c ")
            and places + piece.count(b'<row r="') == piece.count(b' r="') == piece.count(b" r=")
            and piece.count(b'<row r="') == piece.count(b"<row")
            and not any(mark in piece for mark in _UNUSUAL)
        )
        if usual:
            self._reach(piece)
        else:
            self._reach_one_by_one(piece)
        if self._rows * self._columns > AREA_MAX:
            raise HostileZipError("workbook_too_large", _TOO_LARGE_ADVICE)
        self.shared += piece.count(b't="s"') if usual else len(_SHARED_CELL.findall(piece))
        # A look for the bytes themselves is ten times as fast as one for a pattern.
        if (
            b't="e"' in piece or b"<f>" in piece or b"<f " in piece or b"<f/" in piece
            if usual
            else _ERROR.search(piece) or _FORMULA.search(piece)
        ):
            self._look_closely(piece)

    def _reach(self, piece: bytes) -> None:
        """See how far cells reach that all say where they stand; empty ones do not count."""
        filled = _USUAL.findall(piece)
        if filled:
            rows = int(np.array([row for _, row in filled]).astype(np.int64).max())
            columns = max(_column(letters) for letters in {letters for letters, _ in filled})
            self._rows, self._columns = max(self._rows, rows), max(self._columns, columns + 1)
            self._row, self._column = int(filled[-1][1]), _column(filled[-1][0]) + 1

    def _reach_one_by_one(self, piece: bytes) -> None:
        """See how far cells reach of which some stand where the one before lets them."""
        for tag, attributes in _TAG.findall(piece):
            stated = [one or other for one, other in _PLACES.findall(attributes)]
            places = [_PLACE.fullmatch(place) for place in stated]
            if len(places) > 1 or None in places:
                raise HostileZipError("broken_workbook", _HIDDEN_ADVICE)
            place = places[0] if places else None
            if tag == b"row":
                self._row, self._column = int(place[2]) if place else self._row + 1, 0
                continue
            self._column += 1
            if place:
                self._row, self._column = int(place[2]), _column(place[1]) + 1
            self._rows = max(self._rows, self._row)
            self._columns = max(self._columns, self._column)

    def _look_closely(self, piece: bytes) -> None:
        """Find the cells with an error or a formula without a value."""
        for attributes, content in _CELL.findall(piece):
            reference = _REFERENCE.search(attributes)
            if reference is None:
                continue
            place = int(reference[2]) - 1, _column(reference[1])
            value = _VALUE.search(content)
            if _ERROR.search(attributes):
                shown = value[1].decode("utf-8", "replace") if value else None
                self.odd[place] = Odd("error_cell", _ERROR_ADVICE, shown)
            elif value is None and _FORMULA.search(content):
                self.odd[place] = Odd("formula_without_value", _UNCOMPUTED_ADVICE)


def _last(name: str) -> str:
    """Return the last part of a path, in small letters."""
    return name.rpartition("/")[2].lower()


def _whole_cells(source: Iterator[bytes]) -> Iterator[bytes]:
    """Yield the bytes of a sheet in pieces that end where a cell ends."""
    carried = b""
    for piece in source:
        carried += piece
        end = carried.rfind(b"c>") + 2
        if end == 1:
            end = len(carried) if len(carried) > _CARRIED_BYTES_MAX else 0
        if end:
            yield carried[:end]
            carried = carried[end:]
    if carried:
        yield carried


def _column(letters: bytes) -> int:
    """Return the position of a column from 0: A is 0, AA is 26."""
    number = 0
    for letter in letters.upper():
        number = number * 26 + letter - ord("A") + 1
    return number - 1


def _shared_lengths(archive: zipfile.ZipFile, allowance: Allowance) -> IntArray:
    """Return how many bytes each shared text is at most."""
    data = b"".join(pieces(archive, _SHARED, allowance))
    return np.array([len(item) for item in _ITEM.findall(data)], dtype=np.int64)


def _judge_texts(archive: zipfile.ZipFile, shared: Mapping[str, int], lengths: IntArray) -> None:
    """Refuse texts that come to too much where they are written out in every cell."""
    longest = int(lengths.max(initial=0))
    if longest * sum(shared.values()) <= TEXT_BYTES_MAX:
        return
    count = 0
    for name in shared:
        # They were counted before; this is the second reading of the same bytes.
        again = Allowance(bytes_left=archive.getinfo(name).file_size)
        for piece in _whole_cells(pieces(archive, name, again)):
            used = np.array(_SHARED_VALUE.findall(piece)).astype(np.int64)
            count += int(lengths[used[used < len(lengths)]].sum())
            if count > TEXT_BYTES_MAX:
                raise HostileZipError("workbook_too_large", _TOO_LARGE_ADVICE)
