"""Rules of a definition brought into their normal form, in which the head of a network keeps them.

What a rule leaves unsaid and what it says by default are one and the same there, so that both have
one digest.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from service.network.definition import (
    RULE_PARTS,
    ClosurePart,
    FixedQuantityPart,
    Part,
    RulePart,
    SharedCapacityPart,
    ThroughputPart,
    validated,
)
from service.network.faults import FaultList, pointer
from service.network.not_yet import NOT_YET_RULES, refusal
from service.network.quantities import exact_text
from service.network.rules import Rule, rule_of


@dataclass(frozen=True, slots=True, kw_only=True)
class SentRule:
    """A sound rule: its place among the rules as sent, its normal form, and what it says.

    ``per_said`` tells whether the rule itself says for whom its limit holds.
    """

    place: int
    document: Mapping[str, object]
    rule: Rule
    per_said: bool


def read_rules(value: object, faults: FaultList) -> list[SentRule]:
    """Read all rules; those of later versions are refused by name."""
    if value is None:
        return []
    if not isinstance(value, list):
        faults.add(pointer("rules"), "wrong_type", "Send an array of rules.", value)
        return []
    found: list[SentRule] = []
    seen: set[str] = set()
    for place, document in enumerate(value):
        kind = document.get("rule") if isinstance(document, dict) else None
        if type(kind) is str and kind in NOT_YET_RULES:
            detail = refusal(kind, NOT_YET_RULES[kind])
            faults.add(pointer("rules", place, "rule"), "not_yet", detail, kind)
            continue
        if type(kind) is str and kind not in RULE_PARTS:
            detail = f"There is no such rule. The rules are: {', '.join(RULE_PARTS)}."
            faults.add(pointer("rules", place, "rule"), "unknown_rule", detail, kind)
            continue
        model = RULE_PARTS[kind] if type(kind) is str else RulePart
        part = validated(model, document, path=("rules", place), table="rules", faults=faults)
        if part is None:
            continue
        if part.id in seen:
            detail = "Another rule has this id. Give each rule one of its own."
            faults.add(pointer("rules", place, "id"), "duplicate_id", detail, part.id)
            continue
        seen.add(part.id)
        per_said = isinstance(part, ThroughputPart | SharedCapacityPart) and part.per is not None
        normal = _normal(part)
        found.append(
            SentRule(place=place, document=normal, rule=rule_of(normal), per_said=per_said)
        )
    return found


def _normal(part: RulePart) -> dict[str, object]:
    """Return the normal form of a rule: decimals and dates as text, absent keys left out."""
    document: dict[str, object | None] = {
        "rule": part.rule,
        "id": part.id,
        "note": part.note,
        "owner": part.owner,
        "from": None if part.starts is None else part.starts.isoformat(),
        "until": None if part.until is None else part.until.isoformat(),
        "items": _selector(part.items),
    }
    if isinstance(part, ClosurePart):
        document |= {"lanes": _selector(part.lanes), "sites": _selector(part.sites)}
    elif isinstance(part, FixedQuantityPart):
        document |= {"lanes": _selector(part.lanes), "quantity": exact_text(part.quantity)}
    elif isinstance(part, ThroughputPart):
        document |= {
            "sites": _selector(part.sites),
            "flow": part.flow,
            "measure": None if part.measure == "unit" else part.measure,
            "maximum": exact_text(part.maximum),
            "per": _per(part.per),
        }
    elif isinstance(part, SharedCapacityPart):
        document |= {
            "lanes": _selector(part.lanes),
            "measure": None if part.measure == "unit" else part.measure,
            "maximum": exact_text(part.maximum),
            "per": _per(part.per),
        }
    return {key: value for key, value in document.items() if value is not None}


def _per(word: str | None) -> str | None:
    """Return for whom a limit holds; each is what goes without saying."""
    return None if word == "each" else word


def _selector(part: Part | None) -> dict[str, Any] | None:
    """Return a selector as an object of sorted lists; one that picks all is an empty object."""
    if part is None:
        return None
    return {key: list(values) for key, values in part if values is not None}
