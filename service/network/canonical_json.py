"""JSON with one spelling for one value: the canonical form of RFC 8785, without its numbers.

RFC 8785 writes numbers as binary doubles, which would lose what we prove. What goes through here
therefore holds text, whole numbers below 2**53, true, false and null, and decimals as text.
"""

from functools import lru_cache
from json.encoder import encode_basestring

# The largest whole number that every reader of RFC 8785 gives back unchanged (its section 3.2.2.3).
WHOLE_NUMBER_MAX = 2**53 - 1


class NotCanonicalError(ValueError):
    """A value that has no canonical form here, such as a float or a lone surrogate."""


def canonical_json(value: object) -> bytes:
    """Return the RFC 8785 bytes of ``value``.

    Raises ``NotCanonicalError`` for anything but objects with text keys, arrays, text, whole
    numbers between -(2**53 - 1) and 2**53 - 1, true, false and null, and for text that UTF-8
    cannot carry.
    """
    pieces: list[str] = []
    try:
        _append(value, pieces)
        return "".join(pieces).encode()
    except UnicodeEncodeError as error:
        raise NotCanonicalError("text with a lone surrogate has no UTF-8 form") from error
    except RecursionError as error:
        raise NotCanonicalError("the value is nested too deeply") from error


def _append(value: object, pieces: list[str]) -> None:
    """Append the canonical spelling of ``value`` to ``pieces``."""
    # The order matters: bool is a kind of int.
    if isinstance(value, str):
        # The standard library escapes exactly what RFC 8785 (3.2.2.2) escapes, in its spelling.
        pieces.append(encode_basestring(value))
    elif value is None:
        pieces.append("null")
    elif isinstance(value, bool):
        pieces.append("true" if value else "false")
    elif isinstance(value, int):
        if not -WHOLE_NUMBER_MAX <= value <= WHOLE_NUMBER_MAX:
            raise NotCanonicalError("a whole number is too large for canonical JSON")
        pieces.append(str(int(value)))
    elif isinstance(value, dict):
        _append_object(value, pieces)
    elif isinstance(value, list | tuple):
        pieces.append("[")
        for position, element in enumerate(value):
            if position:
                pieces.append(",")
            _append(element, pieces)
        pieces.append("]")
    else:
        raise NotCanonicalError(f"{type(value).__name__} has no canonical JSON form")


def _append_object(value: dict[object, object], pieces: list[str]) -> None:
    """Append an object, its keys in the order of their UTF-16 code units."""
    separator = "{"
    for key, spelled in _in_order(tuple(value)):
        pieces.append(separator + spelled)
        _append(value[key], pieces)
        separator = ","
    pieces.append("}" if value else "{}")


@lru_cache(maxsize=1024)
def _in_order(keys: tuple[object, ...]) -> tuple[tuple[str, str], ...]:
    """Return keys in their order, each with its spelling; objects mostly have the same few."""
    texts = [key for key in keys if isinstance(key, str)]
    if len(texts) < len(keys):
        raise NotCanonicalError("the keys of an object are text")
    # Big-endian UTF-16 bytes compare as the code units do (RFC 8785, 3.2.3).
    texts.sort(key=lambda key: key.encode("utf-16-be"))
    return tuple((key, f"{encode_basestring(key)}:") for key in texts)
