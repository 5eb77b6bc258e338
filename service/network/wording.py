"""Which texts are accepted where: ids, names, notes; and the sentences that refuse the others."""

import re
from collections.abc import Sequence
from typing import Final

ID_CHARACTERS_MAX: Final = 64
NAME_CHARACTERS_MAX: Final = 200
NOTE_CHARACTERS_MAX: Final = 2000
EXTRA_PAIRS_MAX: Final = 16

# C0 and C1 controls and DEL; half surrogate pairs were refused when the JSON was read.
CONTROL: Final = re.compile("[\x00-\x1f\x7f-\x9f]")
# A note or an extra value may have lines.
CONTROL_IN_LINES: Final = re.compile("[\x00-\x08\x0b\x0c\x0e-\x1f\x7f-\x9f]")

ID_ADVICE: Final = "Say 1 to 64 characters, no control characters."
NAME_ADVICE: Final = "Say 1 to 200 characters, no control characters."
EXTRA_ADVICE: Final = (
    "Say an object of at most 16 pairs of text: names of 1 to 64 characters, values of at most "
    "2000, no control characters but line ends and tabs."
)
TAGS_ADVICE: Final = "Say an array of different texts of 1 to 64 characters, no control characters."


def is_id(text: str) -> bool:
    """Return whether ``text`` can be an id, a reference, a unit, a carrier, a lot or a tag."""
    return 1 <= len(text) <= ID_CHARACTERS_MAX and not CONTROL.search(text)


def are_ids(texts: Sequence[str]) -> bool:
    """Return whether every text can be an id, with one search over all of them."""
    if not texts:
        return True
    lengths = list(map(len, texts))
    if min(lengths) < 1 or max(lengths) > ID_CHARACTERS_MAX:
        return False
    return CONTROL.search("".join(texts)) is None


def is_name(text: str) -> bool:
    """Return whether ``text`` can be the name of something, for people."""
    return 1 <= len(text) <= NAME_CHARACTERS_MAX and not CONTROL.search(text)


def is_note(text: str) -> bool:
    """Return whether ``text`` can be a note or a value of ``extra``."""
    return len(text) <= NOTE_CHARACTERS_MAX and not CONTROL_IN_LINES.search(text)


def is_extra(value: object) -> bool:
    """Return whether a JSON value can be ``extra``: at most 16 pairs of text."""
    return (
        isinstance(value, dict)
        and len(value) <= EXTRA_PAIRS_MAX
        and all(is_id(name) and type(text) is str and is_note(text) for name, text in value.items())
    )


def is_id_list(value: object) -> bool:
    """Return whether a JSON value is an array of different ids, possibly empty."""
    return (
        isinstance(value, list)
        and all(type(text) is str and is_id(text) for text in value)
        and len(set(value)) == len(value)
    )
