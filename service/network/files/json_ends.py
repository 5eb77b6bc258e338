"""Where a JSON value ends, found without reading it."""

import re
from typing import Final

import numpy as np

_BLOCK_BYTES: Final = 1 << 16
_ESCAPE: Final = re.compile(rb"\\.", re.DOTALL)
_WORD: Final = re.compile(rb"[-+.0-9A-Za-z]*")
# Quotes and brackets, which alone decide how deep a text is nested.
_IS_MARK: Final = np.isin(np.arange(256), np.frombuffer(b'"[]{}', dtype=np.uint8))


def value_end(text: bytes, start: int, *, within: int | None = None) -> int | None:
    """Return the place behind the value that begins at ``start``; None if it does not end.

    With ``within`` the answer is None as well where it has more bytes than that. Whether it is a
    sound value is for its reader to say: this only finds where it would end.
    """
    limit = len(text) if within is None else min(len(text), start + within)
    first = text[start : start + 1]
    if first == b'"':
        return string_end(text, start)
    if first not in (b"[", b"{"):
        found = _WORD.match(text, start)
        return None if found is None or found.end() == start else found.end()
    depth, inside = 0, False
    while start < limit:
        stop = min(start + _BLOCK_BYTES, limit)
        block = text[start:stop]
        if b"\\" in block:
            # An escape must not be cut in two: an odd row of backslashes at the end takes one more.
            if (len(block) - len(block.rstrip(b"\\"))) % 2:
                stop += 1
                block = text[start:stop]
            block = _ESCAPE.sub(b"__", block)
        content = np.frombuffer(block, dtype=np.uint8)
        places = np.flatnonzero(_IS_MARK[content])
        marks = content[places]
        quotes = marks == ord('"')
        in_string = (np.cumsum(quotes) + inside) % 2 == 1
        # [ and { are 0x5b and 0x7b, their partners 0x5d and 0x7d: bit 2 tells which is which.
        steps = np.where(marks & 4, -1, 1) * ~(quotes | in_string)
        depths = depth + np.cumsum(steps)
        closing = np.flatnonzero((depths == 0) & (steps < 0))
        if len(closing):
            return start + int(places[closing[0]]) + 1
        if len(places):
            depth, inside = int(depths[-1]), bool(in_string[-1])
        start = stop
    return None


def string_end(text: bytes, start: int) -> int | None:
    """Return the place behind the string whose opening quote is at ``start``; None if none is."""
    close = text.find(b'"', start + 1)
    while close >= 0:
        before = text[start + 1 : close]
        if (len(before) - len(before.rstrip(b"\\"))) % 2 == 0:
            return close + 1
        close = text.find(b'"', close + 1)
    return None
