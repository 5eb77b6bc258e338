"""JSON from a source that is not trusted: bounded, without doubled keys, and all of it text.

Whole numbers of more than 18 digits, NaN and infinities, half surrogate pairs, and nesting deeper
than ``NESTING_MAX`` are refused: no document of ours has them.
"""

import json
import re
from typing import Any, NoReturn

# Deeper than any document of ours; far from any limit on recursion.
NESTING_MAX = 32
_DIGITS_MAX = 18

_NO_BRACKETS = re.compile(rb'"[^"\\]*(?:\\.[^"\\]*)*"|[^\[\]{}"]+', re.DOTALL)
_HALF_PAIR = re.compile(rb"\\u[dD][89a-fA-F]")


class StrictJsonError(ValueError):
    """Bytes that are not JSON of the strict kind."""


def strict_json(data: bytes) -> object:
    """Return the value of ``data``; raise ``StrictJsonError`` if it is not strict JSON."""
    if nesting(data) > NESTING_MAX:
        raise StrictJsonError("nested too deeply")
    try:
        value: object = json.loads(
            data.decode(),
            object_pairs_hook=_object,
            parse_int=_whole,
            parse_constant=_constant,
        )
        if _HALF_PAIR.search(data):
            json.dumps(value, ensure_ascii=False).encode()
    except (ValueError, RecursionError) as error:
        raise StrictJsonError(f"not JSON: {error}") from error
    return value


def nesting(data: bytes) -> int:
    """Return how deep ``data`` opens arrays and objects, be it JSON or not."""
    depth = deepest = 0
    for bracket in _NO_BRACKETS.sub(b"", data):
        if bracket in b"[{":
            depth += 1
            deepest = max(deepest, depth)
        elif bracket in b"]}":
            depth -= 1
    return deepest


def _object(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
    """Return an object whose keys are distinct."""
    members = dict(pairs)
    if len(members) != len(pairs):
        raise StrictJsonError("a key occurs twice")
    return members


def _whole(digits: str) -> int:
    """Return a whole number of bounded length."""
    if len(digits) > _DIGITS_MAX:
        raise StrictJsonError("a number is too long")
    return int(digits)


def _constant(name: str) -> NoReturn:
    """Refuse NaN and infinities, which JSON does not have."""
    raise StrictJsonError(f"{name} is not JSON")
