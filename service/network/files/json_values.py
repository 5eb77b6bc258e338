"""What every reader of JSON text here agrees on: numbers as digits, white space, plain strings."""

import re
from typing import Final

SPACE: Final = b" \t\n\r"

_NOT_SPACE: Final = re.compile(rb"[^ \t\n\r]|\Z")
# RFC 8259, section 7: such characters stand in a string only behind a backslash.
_CONTROL: Final = re.compile("[\x00-\x1f]")


class Number(str):
    """A JSON number, kept as the digits that were sent; text proper is a plain ``str``."""

    __slots__ = ()


def is_plain_text(text: str) -> bool:
    """Return whether a text can stand in a JSON string as it is, but for quote and backslash."""
    return _CONTROL.search(text) is None


def skipped(text: bytes, place: int) -> int:
    """Return the first place from ``place`` on that is no white space."""
    found = _NOT_SPACE.search(text, place)
    assert found is not None  # noqa: S101 - the end of the text is such a place
    return found.start()


def skipped_back(text: bytes, place: int) -> int:
    """Return the place behind the last character before ``place`` that is no white space."""
    while place > 0 and text[place - 1] in SPACE:
        place -= 1
    return place


def closing_bracket(text: bytes, start: int, *, behind: bytes) -> int:
    """Return the first bracket from ``start`` on that can close an array, -1 if there is none.

    It stands behind one of the characters of ``behind``, and before a comma or a brace; in a text
    both would be rare, and then its quotes do not come in pairs.
    """
    place = text.find(b"]", start)
    while place >= 0:
        following = skipped(text, place + 1)
        if text[skipped_back(text, place) - 1] in behind and text[following : following + 1] in (
            b",",
            b"}",
        ):
            return place
        place = text.find(b"]", place + 1)
    return -1
