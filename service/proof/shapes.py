"""The shape of JSON documents, stated as data and checked before anything is read from them.

A shape is a function from a value to None, or to what is wrong and where; objects are closed.
"""

import functools
import re
from collections.abc import Callable, Mapping
from fractions import Fraction

Shape = Callable[[object], str | None]

# Longer than any total of a network, and short enough to be read in no time.
AMOUNT_CHARACTERS_MAX = 1000

_AMOUNT = re.compile(r"-?(?:0|[1-9][0-9]*)(?:\.[0-9]+)?|-?[1-9][0-9]*/[1-9][0-9]*")
_WHOLE = re.compile(r"0|-?[1-9][0-9]*")
_DIGEST = re.compile(r"sha-256:[0-9a-f]{64}")


@functools.lru_cache(maxsize=65_536)
def amount(text: str) -> Fraction:
    """Return the value of a text of the shape ``is_amount``."""
    return Fraction(text)


def is_text(value: object) -> str | None:
    """Accept text."""
    return None if isinstance(value, str) else ": not text"


def is_flag(value: object) -> str | None:
    """Accept true and false."""
    return None if isinstance(value, bool) else ": not true or false"


def is_count(value: object) -> str | None:
    """Accept a whole number from 0 to 2**53 - 1."""
    if isinstance(value, int) and not isinstance(value, bool) and 0 <= value < 2**53:
        return None
    return ": not a count"


def is_amount(value: object) -> str | None:
    """Accept the text of an exact number: a plain decimal or a ratio of whole numbers."""
    if isinstance(value, str) and len(value) <= AMOUNT_CHARACTERS_MAX and _AMOUNT.fullmatch(value):
        return None
    return ": not an exact number"


def is_whole(value: object) -> str | None:
    """Accept the text of a whole number."""
    if isinstance(value, str) and len(value) <= AMOUNT_CHARACTERS_MAX and _WHOLE.fullmatch(value):
        return None
    return ": not a whole number as text"


def is_digest(value: object) -> str | None:
    """Accept a SHA-256 as it is written everywhere."""
    return None if isinstance(value, str) and _DIGEST.fullmatch(value) else ": not a digest"


def is_any_object(value: object) -> str | None:
    """Accept an object, whatever is in it."""
    return None if isinstance(value, dict) else ": not an object"


def is_texts(value: object) -> str | None:
    """Accept an object of texts."""
    holds = isinstance(value, dict) and all(isinstance(text, str) for text in value.values())
    return None if holds else ": not an object of texts"


def or_null(shape: Shape) -> Shape:
    """Accept null, or what ``shape`` accepts."""
    return lambda value: None if value is None else shape(value)


def one_of(*allowed: object) -> Shape:
    """Accept one of the values, and not one that merely equals it, as 1 does true."""

    def shape(value: object) -> str | None:
        holds = any(value == one and type(value) is type(one) for one in allowed)
        return None if holds else f": not one of {allowed}"

    return shape


def list_of(shape: Shape) -> Shape:
    """Accept an array whose elements all have ``shape``."""

    def elements(value: object) -> str | None:
        if not isinstance(value, list):
            return ": not an array"
        for position, element in enumerate(value):
            wrong = shape(element)
            if wrong is not None:
                return f"/{position}{wrong}"
        return None

    return elements


def record(required: Mapping[str, Shape], optional: Mapping[str, Shape] | None = None) -> Shape:
    """Accept an object with the required keys, maybe the optional ones, and no others."""
    shapes = {**required, **(optional or {})}

    def members(value: object) -> str | None:
        if not isinstance(value, dict):
            return ": not an object"
        for key in required:
            if key not in value:
                return f"/{key}: missing"
        for key, member in value.items():
            if key not in shapes:
                return f"/{key}: not known"
            wrong = shapes[key](member)
            if wrong is not None:
                return f"/{key}{wrong}"
        return None

    return members
