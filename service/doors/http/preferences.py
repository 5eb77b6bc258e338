"""The header ``Prefer`` (RFC 7240): what a client would like, and what was done about it."""

import re
from collections.abc import Mapping, Sequence
from typing import Final

_NAME: Final = r"[!#$%&'*+.^_`|~0-9A-Za-z-]+"
_WORD: Final = rf'(?:{_NAME}|"(?:[^"\\\x00-\x08\x0a-\x1f\x7f]|\\[^\x00-\x08\x0a-\x1f\x7f])*")'
_PART: Final = rf"{_NAME}(?:[ \t]*=[ \t]*{_WORD})?"
_PREFERENCE: Final = re.compile(
    rf"[ \t]*(?P<name>{_NAME})(?:[ \t]*=[ \t]*(?P<value>{_WORD}))?"
    rf"(?:[ \t]*;(?:[ \t]*{_PART})?)*[ \t]*(?:,|$)"
)


def read_preferences(fields: Sequence[str]) -> Mapping[str, str]:
    """Return the preferences of all ``Prefer`` fields, names in lower case.

    The first of several with one name counts, parameters are of no use here, and a field that does
    not follow the grammar is ignored: RFC 7240 lets no request fail over a preference.
    """
    preferences: dict[str, str] = {}
    for field in fields:
        found: dict[str, str] = {}
        position = 0
        while position < len(field):
            match = _PREFERENCE.match(field, position)
            if match is None:
                found = {}
                break
            position = match.end()
            value = match["value"] or ""
            if value.startswith('"'):
                value = re.sub(r"\\(.)", r"\1", value[1:-1])
            found.setdefault(match["name"].lower(), value)
        for name, value in found.items():
            preferences.setdefault(name, value)
    return preferences


def applied(preferences: Mapping[str, str]) -> Mapping[str, str]:
    """Return the header that says which preferences the answer follows.

    Every run is answered as soon as it is stored, so ``respond-async`` is what happens anyway.
    ``wait`` is not followed yet, and therefore not named.
    """
    if preferences.get("respond-async") == "":
        return {"Preference-Applied": "respond-async"}
    return {}
