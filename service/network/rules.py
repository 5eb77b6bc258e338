"""The rules that are built, their selectors, and what they pick in a network.

In ``Network.head["rules"]`` a rule is a JSON object in normal form: decimals as text, lists of
selectors sorted, absent keys left out. Here it becomes a small object.
"""

import json
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np

from service.network.columns import BoolArray, Network, Texts
from service.network.naming import lane_rows
from service.network.quantities import parse_exact


@dataclass(frozen=True, slots=True, kw_only=True)
class LaneSelector:
    """Picks lanes: every key that is not None must hold; its values are alternatives.

    ``ids`` are names of lanes, ``origin`` and ``destination`` ids of sites.
    """

    ids: tuple[str, ...] | None = None
    origin: tuple[str, ...] | None = None
    destination: tuple[str, ...] | None = None
    carrier: tuple[str, ...] | None = None
    tag: tuple[str, ...] | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class SiteSelector:
    """Picks sites by id, role and tag, as ``LaneSelector`` does lanes."""

    ids: tuple[str, ...] | None = None
    role: tuple[str, ...] | None = None
    tag: tuple[str, ...] | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class ItemSelector:
    """Picks items by id and tag, as ``LaneSelector`` does lanes."""

    ids: tuple[str, ...] | None = None
    tag: tuple[str, ...] | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class _RuleBase:
    """What every rule says. ``starts`` and ``ends`` are ISO dates, inclusive, or None."""

    id: str
    note: str | None
    owner: str | None
    starts: str | None
    ends: str | None
    items: ItemSelector | None


@dataclass(frozen=True, slots=True, kw_only=True)
class Closure(_RuleBase):
    """Nothing moves on the picked lanes, or over the picked sites; exactly one of both is given."""

    lanes: LaneSelector | None
    sites: SiteSelector | None

    name = "closure"


@dataclass(frozen=True, slots=True, kw_only=True)
class FixedQuantity(_RuleBase):
    """On each picked lane, each picked item that can use it moves exactly ``quantity``.

    ``quantity`` is in the measure of the lane.
    """

    lanes: LaneSelector
    quantity: Fraction

    name = "fixed_quantity"


@dataclass(frozen=True, slots=True, kw_only=True)
class Throughput(_RuleBase):
    """At each picked site at most ``maximum`` is ``received``, ``sent`` or passes ``through``.

    ``maximum`` is in ``measure``, over all picked items; ``per`` is ``each`` or ``together``: of
    every site by itself, or of all picked sites.
    """

    sites: SiteSelector
    flow: str
    measure: str
    maximum: Fraction
    per: str

    name = "throughput"


@dataclass(frozen=True, slots=True, kw_only=True)
class SharedCapacity(_RuleBase):
    """The picked lanes carry at most ``maximum`` of the picked items, in ``measure``.

    ``per`` is ``each`` or ``together``: every lane by itself, or all picked lanes.
    """

    lanes: LaneSelector
    measure: str
    maximum: Fraction
    per: str

    name = "shared_capacity"


Rule = Closure | FixedQuantity | Throughput | SharedCapacity


def rules_of(network: Network) -> tuple[Rule, ...]:
    """Return the rules of a checked network, in the order of its head (sorted by id)."""
    documents: Any = network.head.get("rules", [])
    return tuple(rule_of(document) for document in documents)


def rule_of(document: Mapping[str, Any]) -> Rule:
    """Return one rule from its normal form; raises ``KeyError`` or ``ValueError`` if it is none."""
    common: dict[str, Any] = {
        "id": document["id"],
        "note": document.get("note"),
        "owner": document.get("owner"),
        "starts": document.get("from"),
        "ends": document.get("until"),
        "items": _selector(ItemSelector, document.get("items")),
    }
    kind = document["rule"]
    if kind == "closure":
        return Closure(
            **common,
            lanes=_selector(LaneSelector, document.get("lanes")),
            sites=_selector(SiteSelector, document.get("sites")),
        )
    if kind == "fixed_quantity":
        return FixedQuantity(
            **common,
            lanes=_selector(LaneSelector, document["lanes"]),
            quantity=parse_exact(document["quantity"]),
        )
    if kind == "throughput":
        return Throughput(
            **common,
            sites=_selector(SiteSelector, document["sites"]),
            flow=document["flow"],
            measure=document.get("measure", "unit"),
            maximum=parse_exact(document["maximum"]),
            per=document.get("per", "each"),
        )
    if kind == "shared_capacity":
        return SharedCapacity(
            **common,
            lanes=_selector(LaneSelector, document["lanes"]),
            measure=document.get("measure", "unit"),
            maximum=parse_exact(document["maximum"]),
            per=document.get("per", "each"),
        )
    raise ValueError(f"no rule of this format: {kind}")


def in_force(rule: Rule, cut_off: str) -> bool:
    """Return whether a rule holds on the local date of ``cut_off`` (RFC 3339, as in the head)."""
    # The date of an RFC 3339 time is the local one, and ISO dates sort as they follow each other.
    day = cut_off[:10]
    return (rule.starts is None or rule.starts <= day) and (rule.ends is None or day <= rule.ends)


def lanes_selected(network: Network, rule: Rule) -> BoolArray:
    """Return, in shape (lanes,), which lanes a rule is about.

    For a closure of sites these are the lanes from or to them; for a throughput limit, none.
    """
    lanes = network.lanes
    if isinstance(rule, Throughput):
        return np.zeros(len(lanes), dtype=np.bool_)
    if isinstance(rule, Closure) and rule.sites is not None:
        closed = sites_selected(network, rule)
        return closed[lanes.origin] | closed[lanes.destination]
    return pick_lanes(network, rule.lanes or LaneSelector())


def pick_lanes(network: Network, selector: LaneSelector) -> BoolArray:
    """Return, in shape (lanes,), which lanes a selector picks."""
    lanes = network.lanes
    picked = np.ones(len(lanes), dtype=np.bool_)
    if selector.ids is not None:
        named = np.zeros(len(lanes), dtype=np.bool_)
        named[[row for row in lane_rows(network, selector.ids) if row >= 0]] = True
        picked &= named
    for ids, column in ((selector.origin, lanes.origin), (selector.destination, lanes.destination)):
        if ids is not None:
            picked &= _flags([site.id in set(ids) for site in network.sites])[column]
    if selector.carrier is not None:
        picked &= _rows_with(lanes.carrier, set(selector.carrier).__contains__)
    if selector.tag is not None:
        tags = set(selector.tag)
        picked &= _rows_with(lanes.tags, lambda text: not tags.isdisjoint(json.loads(text)))
    return picked


def sites_selected(network: Network, rule: Rule) -> BoolArray:
    """Return, in shape (sites,), which sites a rule is about; none for a rule about lanes."""
    if isinstance(rule, FixedQuantity | SharedCapacity) or rule.sites is None:
        return np.zeros(len(network.sites), dtype=np.bool_)
    return pick_sites(network, rule.sites)


def pick_sites(network: Network, selector: SiteSelector) -> BoolArray:
    """Return, in shape (sites,), which sites a selector picks."""
    return _flags(
        [
            _holds(selector.ids, (site.id,))
            and _holds(selector.role, site.roles)
            and _holds(selector.tag, site.tags)
            for site in network.sites
        ]
    )


def items_selected(network: Network, rule: Rule) -> BoolArray:
    """Return, in shape (items,), which items a rule is about; all where it names none."""
    return pick_items(network, rule.items or ItemSelector())


def pick_items(network: Network, selector: ItemSelector) -> BoolArray:
    """Return, in shape (items,), which items a selector picks."""
    return _flags(
        [
            _holds(selector.ids, (item.id,)) and _holds(selector.tag, item.tags)
            for item in network.items
        ]
    )


def _holds(wanted: tuple[str, ...] | None, has: Iterable[str]) -> bool:
    """Return whether a key of a selector is absent or agrees with what a thing has."""
    return wanted is None or not set(wanted).isdisjoint(has)


def _flags(values: list[bool]) -> BoolArray:
    """Return a list of answers as an array, also where it is empty."""
    return np.array(values, dtype=np.bool_)


def _rows_with(column: Texts, accepts: Any) -> BoolArray:  # noqa: ANN401 - a predicate on text
    """Return which rows have a text that ``accepts`` takes; rows without text have none."""
    # The last element answers for code -1.
    answers = _flags([*(bool(accepts(text)) for text in column.values), False])
    return answers[column.codes]


def _selector(kind: Any, document: Mapping[str, Any] | None) -> Any:  # noqa: ANN401 - see rule_of
    """Return a selector from its JSON object, None where there is none."""
    if document is None:
        return None
    return kind(**{key: tuple(values) for key, values in document.items()})
