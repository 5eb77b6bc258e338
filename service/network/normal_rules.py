"""The normal form of rules: which keys a rule has in the head of a network, and of what shape."""

import re
from collections.abc import Callable, Mapping
from typing import Final

from service.network.canonical_head import DECIMAL
from service.network.column_bytes import NormalFormError
from service.network.normal_values import is_date

_SELECTORS: Final = {
    "lanes": frozenset({"ids", "origin", "destination", "carrier", "tag"}),
    "sites": frozenset({"ids", "role", "tag"}),
    "items": frozenset({"ids", "tag"}),
}
_DATE = re.compile(r"[0-9]{4}-[0-9]{2}-[0-9]{2}")


def _is_text(value: object) -> bool:
    return isinstance(value, str) and bool(value)


def _is_quantity(value: object) -> bool:
    return isinstance(value, str) and bool(DECIMAL.fullmatch(value)) and value[0] != "-"


def _is_one_of(*choices: str) -> Callable[[object], bool]:
    return lambda value: isinstance(value, str) and value in choices


def _is_selector(kind: str) -> Callable[[object], bool]:
    def picks(value: object) -> bool:
        return (
            isinstance(value, dict)
            and set(value) <= _SELECTORS[kind]
            and all(_is_sorted_texts(texts) for texts in value.values())
        )

    return picks


def _is_sorted_texts(value: object) -> bool:
    if not isinstance(value, list) or not all(isinstance(text, str) for text in value):
        return False
    return value == sorted(set(value))


_Checks = Mapping[str, Callable[[object], bool]]

_COMMON: Final[_Checks] = {"rule": _is_text, "id": _is_text}
_OPTIONAL: Final[_Checks] = {
    "note": lambda value: isinstance(value, str),
    "owner": lambda value: isinstance(value, str),
    "from": is_date,
    "until": is_date,
    "items": _is_selector("items"),
}
# What each rule needs, and what it may have, beside the common keys.
_RULES: Final[Mapping[str, tuple[_Checks, _Checks]]] = {
    "closure": ({}, {"lanes": _is_selector("lanes"), "sites": _is_selector("sites")}),
    "fixed_quantity": ({"lanes": _is_selector("lanes"), "quantity": _is_quantity}, {}),
    "throughput": (
        {
            "sites": _is_selector("sites"),
            "flow": _is_one_of("received", "sent", "through"),
            "maximum": _is_quantity,
        },
        {"measure": _is_text, "per": _is_one_of("each", "together")},
    ),
    "shared_capacity": (
        {"lanes": _is_selector("lanes"), "maximum": _is_quantity},
        {"measure": _is_text, "per": _is_one_of("each", "together")},
    ),
}


def check_rule(rule: Mapping[str, object]) -> None:
    """Raise ``NormalFormError`` unless ``rule`` has the shape of one that is built."""
    kind = rule.get("rule")
    if not isinstance(kind, str) or kind not in _RULES:
        raise NormalFormError("an unknown rule")
    needed, possible = _RULES[kind]
    needed = {**_COMMON, **needed}
    checks = {**needed, **_OPTIONAL, **possible}
    if not set(needed) <= set(rule) <= set(checks):
        raise NormalFormError("a rule has other keys")
    if not all(checks[key](value) for key, value in rule.items()):
        raise NormalFormError("a rule has a value of another shape")
    if kind == "closure" and ("lanes" in rule) == ("sites" in rule):
        raise NormalFormError("a closure is of lanes or of sites")
