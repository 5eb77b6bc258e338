"""The shape of JSON documents, stated as data and checked before anything is read from them.

A shape is a function from a value to None, or to what is wrong and where; objects are closed.
"""

import functools
import itertools
import re
from collections.abc import Callable, Mapping, Sequence
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


class or_null:  # noqa: N801 - reads as the functions beside it
    """Accept null, or what ``shape`` accepts."""

    def __init__(self, shape: Shape) -> None:
        """Remember the shape."""
        self.shape = shape

    def __call__(self, value: object) -> str | None:
        """Return what is wrong with ``value``."""
        return None if value is None else self.shape(value)


def one_of(*allowed: object) -> Shape:
    """Accept one of the values, and not one that merely equals it, as 1 does true."""

    def shape(value: object) -> str | None:
        holds = any(value == one and type(value) is type(one) for one in allowed)
        return None if holds else f": not one of {allowed}"

    return shape


class list_of:  # noqa: N801 - reads as the functions beside it
    """Accept an array whose elements all have ``shape``."""

    def __init__(self, shape: Shape) -> None:
        """Remember the shape."""
        self.shape = shape

    def __call__(self, value: object) -> str | None:
        """Return what is wrong with ``value``."""
        if not isinstance(value, list):
            return ": not an array"
        # Most arrays are sound, and looked at column by column; the others say where they are not.
        if all_hold(self.shape, value):
            return None
        for position, element in enumerate(value):
            wrong = self.shape(element)
            if wrong is not None:
                return f"/{position}{wrong}"
        return None


class record:  # noqa: N801 - reads as the functions beside it
    """Accept an object with the required keys, maybe the optional ones, and no others."""

    def __init__(
        self, required: Mapping[str, Shape], optional: Mapping[str, Shape] | None = None
    ) -> None:
        """Remember the shapes of all members."""
        self.required = tuple(required)
        self.shapes = {**required, **(optional or {})}

    def __call__(self, value: object) -> str | None:
        """Return what is wrong with ``value``."""
        if not isinstance(value, dict):
            return ": not an object"
        for key in self.required:
            if key not in value:
                return f"/{key}: missing"
        for key, member in value.items():
            if key not in self.shapes:
                return f"/{key}: not known"
            wrong = self.shapes[key](member)
            if wrong is not None:
                return f"/{key}{wrong}"
        return None


def all_hold(shape: Shape, values: Sequence[object]) -> bool:
    """Return whether ``shape`` accepts every one of ``values``, as fast as many are looked at."""
    if isinstance(shape, or_null):
        return all_hold(shape.shape, [value for value in values if value is not None])
    if isinstance(shape, list_of):
        arrays = [value for value in values if isinstance(value, list)]
        return len(arrays) == len(values) and all_hold(
            shape.shape, list(itertools.chain.from_iterable(arrays))
        )
    if isinstance(shape, record):
        return _records_hold(shape, values)
    if shape in (is_text, is_amount, is_whole):
        return _texts_hold(shape, values)
    return all(shape(value) is None for value in values)


def _texts_hold(shape: Shape, values: Sequence[object]) -> bool:
    """Return whether all ``values`` are texts, amounts or whole numbers."""
    texts = [value for value in values if isinstance(value, str)]
    if shape is is_text or len(texts) != len(values):
        return len(texts) == len(values)
    pattern = _AMOUNT if shape is is_amount else _WHOLE
    # A column says the same again and again, such as 0.
    distinct = set(texts)
    short = max(map(len, distinct), default=0) <= AMOUNT_CHARACTERS_MAX
    return short and all(map(pattern.fullmatch, distinct))


def _records_hold(shape: record, values: Sequence[object]) -> bool:
    """Return whether all ``values`` are objects of the shape, with the same keys."""
    rows = [value for value in values if isinstance(value, dict)]
    if len(rows) != len(values):
        return False
    if not rows:
        return True
    keys = rows[0].keys()
    if not set(shape.required) <= keys <= shape.shapes.keys():
        return False
    # Rows that differ in what is optional are looked at one by one.
    if not all(map(keys.__eq__, map(dict.keys, rows))):
        return all(shape(row) is None for row in rows)
    return all(all_hold(shape.shapes[key], [row[key] for row in rows]) for key in keys)
