"""JSON text to Python values without loss: numbers keep their digits, every flaw has its place.

The standard library's reader does the work; around it stand the checks that it leaves out: bad
UTF-8, depth, NaN and Infinity, names that occur twice in one object, half surrogate pairs.
"""

import json
import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any, NoReturn

import numpy as np

from service.network.faults import Fault, pointer
from service.network.files.json_tables import LARGE_BYTES, Cut, Kinds, cut_tables
from service.network.files.json_values import Number

__all__ = ["BYTE_ORDER_MARK", "Number", "ReadJson", "nesting", "read_json"]

BYTE_ORDER_MARK = b"\xef\xbb\xbf"
# Everything but quotes and brackets, which alone decide how deep a text is nested.
_NOT_STRUCTURE = bytes(set(range(256)) - set(b'"[]{}'))
_ESCAPE = re.compile(rb"\\.", re.DOTALL)
_STRING_OR_CONSTANT = re.compile(r'"(?:[^"\\]|\\.)*"|-?Infinity|NaN', re.DOTALL)
_HALF_PAIR_ESCAPE = re.compile(rb"\\u[dD][89a-fA-F]")
_HALF_PAIR = re.compile("[\ud800-\udfff]")


class _Repeated(dict[str, object]):
    """An object in which some name occurs more than once; ``names`` are those."""

    names: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True, kw_only=True)
class ReadJson:
    """What a text held: ``value``, or the faults that made it unreadable or invalid."""

    value: object
    unreadable: tuple[Fault, ...]
    invalid: tuple[Fault, ...]


def read_json(
    data: bytes,
    *,
    nesting_max: int,
    tables: Mapping[str, Kinds] | None = None,
    large_bytes: int = LARGE_BYTES,
) -> ReadJson:
    """Read a JSON text (RFC 8259); a leading byte order mark is passed over.

    ``unreadable`` faults concern the text as such; ``invalid`` ones the names and texts in it
    (RFC 8259 leaves them open, but they have no certain meaning). With ``tables``, arrays in those
    members with more than ``large_bytes`` are scanned (``network/scanned.py``) where that surely
    comes to the same.
    """
    text_bytes = data.removeprefix(BYTE_ORDER_MARK)
    if tables and len(text_bytes) > large_bytes:
        rest, cuts = cut_tables(text_bytes, tables, _decoded, large_bytes=large_bytes)
        if cuts:
            read = _read_exactly(rest, nesting_max=nesting_max)
            if not read.unreadable and not read.invalid:
                for cut in cuts:
                    _put(read.value, cut)
                return read
            # The whole text knows the lines and columns of its faults.
    return _read_exactly(text_bytes, nesting_max=nesting_max)


def _put(value: Any, cut: Cut) -> None:  # noqa: ANN401 - JSON, at a path that is known to be there
    """Put a scanned value to its place in a document."""
    *path, last = cut.path
    for name in path:
        value = value[name]
    value[last] = cut.value


def _decoded(text: bytes) -> object:
    """Return the value of a part of a text that was read before."""
    return _Reader().decoder.decode(text.decode("utf-8"))


def _read_exactly(text_bytes: bytes, *, nesting_max: int) -> ReadJson:
    """Read a JSON text value by value."""
    try:
        text = text_bytes.decode("utf-8")
    except UnicodeDecodeError as error:
        detail = f"The text is not UTF-8: byte {error.start + 1} does not fit."
        return _unreadable("not_utf8", detail)
    depth = nesting(text_bytes)
    if depth > nesting_max:
        detail = f"Nested {depth} deep; at most {nesting_max} levels of arrays and objects."
        return _unreadable("nested_too_deeply", detail)
    reader = _Reader()
    try:
        value = reader.decoder.decode(text)
    except json.JSONDecodeError as error:
        detail = f"Not JSON: {error.msg}, at line {error.lineno}, column {error.colno}."
        return _unreadable("not_json", detail, text[error.pos : error.pos + 20])
    except _ConstantError as error:
        line, column = _place_of_constant(text)
        detail = f"Not JSON: {error} at line {line}, column {column}. Say a number, or null."
        return _unreadable("not_json", detail, str(error))
    except RecursionError:
        # Only a caller that allows more levels than the interpreter has can get here.
        return _unreadable("nested_too_deeply", "Nested too deeply.")
    invalid: tuple[Fault, ...] = ()
    if reader.repeated or _HALF_PAIR_ESCAPE.search(text_bytes):
        invalid = tuple(_doubtful(value))
    return ReadJson(value=value, unreadable=(), invalid=invalid)


def nesting(data: bytes) -> int:
    """Return how many levels of arrays and objects a JSON text has, without reading it."""
    if b"\\" in data:
        data = _ESCAPE.sub(b"", data)
    marks = np.frombuffer(data.translate(None, _NOT_STRUCTURE), dtype=np.uint8)
    quotes = marks == ord('"')
    # Between an odd and an even quote is a string, whose brackets count for nothing.
    # Eight bits suffice to tell odd from even.
    outside = ~quotes & (np.cumsum(quotes, dtype=np.uint8) % 2 == 0)
    # [ and { are 0x5b and 0x7b, their partners 0x5d and 0x7d: bit 2 tells which is which.
    steps = np.where(marks[outside] & 4, np.int8(-1), np.int8(1))
    return max(0, int(np.cumsum(steps, dtype=np.int64).max(initial=0)))


class _ConstantError(ValueError):
    """A NaN or Infinity stands where a value should."""


class _Reader:
    """One reading: a decoder, and whether it met an object with a repeated name."""

    def __init__(self) -> None:
        """Prepare a decoder; its hooks run once for each object and number."""
        self.repeated = False
        self.decoder = json.JSONDecoder(
            object_pairs_hook=self._object,
            parse_int=Number,
            parse_float=Number,
            parse_constant=_refuse_constant,
        )

    def _object(self, pairs: list[tuple[str, object]]) -> dict[str, object]:
        """Return an object; mark it if a name occurs twice, for the standard reader would not."""
        value = dict(pairs)
        if len(value) == len(pairs):
            return value
        self.repeated = True
        marked = _Repeated(value)
        names = [name for name, _ in pairs]
        marked.names = tuple(name for name in value if names.count(name) > 1)
        return marked


def _refuse_constant(constant: str) -> NoReturn:
    """Refuse NaN and Infinity, which the standard reader accepts."""
    raise _ConstantError(constant)


def _place_of_constant(text: str) -> tuple[int, int]:
    """Return line and column of the first NaN or Infinity outside of strings."""
    for match in _STRING_OR_CONSTANT.finditer(text):
        if not match[0].startswith('"'):
            before = text[: match.start()]
            return before.count("\n") + 1, match.start() - before.rfind("\n")
    raise AssertionError("the reader met a constant that is not in the text")


def _doubtful(root: object) -> Iterator[Fault]:
    """Find repeated names and half surrogate pairs, in document order."""
    waiting: list[tuple[str, object]] = [("", root)]
    while waiting:
        place, value = waiting.pop()
        if isinstance(value, str):
            if _HALF_PAIR.search(value):
                yield _half_pair(place)
        elif isinstance(value, dict):
            if isinstance(value, _Repeated):
                for name in value.names:
                    detail = "This name occurs more than once in one object. Keep one of them."
                    at = place + pointer(_shown(name))
                    yield Fault(pointer=at, code="duplicate_name", detail=detail, value=None)
            for name in value:
                if _HALF_PAIR.search(name):
                    yield _half_pair(place + pointer(_shown(name)))
            members = [(place + pointer(_shown(name)), value[name]) for name in value]
            waiting.extend(reversed(members))
        elif isinstance(value, list):
            waiting.extend(
                (f"{place}/{position}", value[position])
                for position in range(len(value) - 1, -1, -1)
            )


def _half_pair(place: str) -> Fault:
    """Return the fault of a text that UTF-8 cannot carry."""
    detail = "Half of a surrogate pair is no character. Escape both halves, or send UTF-8."
    return Fault(pointer=place, code="not_text", detail=detail, value=None)


def _shown(name: str) -> str:
    """Return a name as a report can carry it."""
    return name.encode("utf-8", "replace").decode("utf-8")


def _unreadable(code: str, detail: str, value: str | None = None) -> ReadJson:
    """Return the one fault that stopped the reading."""
    shown = None if value is None else _shown(value)
    fault = Fault(pointer="", code=code, detail=detail, value=shown)
    return ReadJson(value=None, unreadable=(fault,), invalid=())
