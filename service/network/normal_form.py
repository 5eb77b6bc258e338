"""One order and one spelling for a network, however it was sent.

Items and sites go by the UTF-8 bytes of their id, demand by reference, supply by (site, item, unit
cost per item unit, currency, best before, lot; before the cost goes the date from which it is
available), lanes by (origin, destination, item, id, carrier, unit cost, must-ship, capacity, tags);
what is left decides the rest, so that the order is total.
"""

from collections.abc import Mapping, Sequence
from dataclasses import fields, replace
from fractions import Fraction
from typing import TYPE_CHECKING, Any, TypeVar

import numpy as np

from service.network.canonical_json import canonical_json
from service.network.column_bytes import NormalFormError, exponent_and_values
from service.network.columns import (
    BoolArray,
    CodeArray,
    Decimals,
    DemandTable,
    IntArray,
    Item,
    LaneTable,
    Network,
    Site,
    SupplyTable,
    Texts,
    rows_at,
)
from service.network.lane_keys import LaneKeys
from service.network.money import factors
from service.network.units import item_units

if TYPE_CHECKING:
    from numpy.typing import NDArray

_Table = TypeVar("_Table", SupplyTable, DemandTable, LaneTable)

# Above every scaled value: an absent limit or date sorts behind all present ones.
_LAST = np.iinfo(np.int64).max


def normal_form(network: Network) -> Network:
    """Return ``network`` in normal form; items, sites and rows may come in any order.

    Texts get distinct, sorted, used values, decimals their least exponent, and a must-ship of 0
    becomes absent. Nothing is checked but what sorting needs.
    """
    items, item_places = _sorted_by_id(network.items)
    sites, site_places = _sorted_by_id(network.sites)
    supply = _spelled(network.supply)
    demand = _spelled(network.demand)
    lanes = _spelled(network.lanes)
    supply = replace(supply, site=site_places[supply.site], item=item_places[supply.item])
    demand = replace(demand, site=site_places[demand.site], item=item_places[demand.item])
    lanes = replace(
        lanes,
        origin=site_places[lanes.origin],
        destination=site_places[lanes.destination],
        # Position -1, any item, is the last entry of the places and leads to itself.
        item=np.append(item_places, np.int32(-1))[lanes.item],
        must_ship=_without_zeros(lanes.must_ship),
    )
    return Network(
        head=_normal_head(network.head),
        items=tuple(_normal_item(item) for item in items),
        sites=tuple(_normal_site(site) for site in sites),
        supply=_in_order(supply, supply_order(supply, items, factors(network.head))),
        demand=_in_order(demand, np.argsort(demand.reference, kind="stable")),
        lanes=_in_order(lanes, lane_order(lanes)),
    )


def lane_order(lanes: LaneTable) -> IntArray:
    """Return the row numbers of ``lanes`` in the order of the normal form.

    Texts must be spelled normally, so that their codes sort as they do.
    """
    order = np.arange(len(lanes), dtype=np.int64)
    keys = LaneKeys(lanes).keys
    if not bool((keys[1:] >= keys[:-1]).all()):
        order = np.argsort(keys, kind="stable")
        keys = keys[order]
    same = keys[1:] == keys[:-1]
    if not same.any():
        return order
    # Lanes that share their ends are few; only they need the long key.
    tied = np.flatnonzero(np.append(same, False) | np.insert(same, 0, False))
    rows = order[tied]
    by_last_first: tuple[NDArray[np.generic], ...] = (
        lanes.tariff.codes[rows],
        lanes.charges.codes[rows],
        lanes.currency.codes[rows],
        lanes.extra.codes[rows],
        lanes.closes.codes[rows],
        lanes.arrives.codes[rows],
        lanes.departs.codes[rows],
        np.where(lanes.transit_days.present, lanes.transit_days.values, -1)[rows],
        lanes.per.codes[rows],
        lanes.measure.codes[rows],
        lanes.tags.codes[rows],
        np.where(lanes.capacity.present, lanes.capacity.values, _LAST)[rows],
        lanes.must_ship.values[rows],
        lanes.unit_cost.values[rows],
        lanes.carrier.codes[rows],
        np.unique(lanes.ids[rows], return_inverse=True)[1],
        lanes.item[rows],
        lanes.destination[rows],
        lanes.origin[rows],
    )
    order[tied] = rows[np.lexsort(by_last_first)]
    return order


def supply_order(
    supply: SupplyTable, items: Sequence[Item], worth: Mapping[str | None, Fraction]
) -> IntArray:
    """Return the row numbers of ``supply`` in the order of the normal form.

    This is the stored form: another order changes every digest and makes stored networks
    unreadable. Which stock is used up first is decided elsewhere (``planning/documents/paths.py``).

    ``worth`` is what one unit of each currency is in that of the plan. Texts must be spelled
    normally, so that their codes sort as they do.
    """
    best_before = supply.best_before.codes.astype(np.int64)
    rest: list[NDArray[np.generic]] = []
    for field in fields(SupplyTable):
        column = getattr(supply, field.name)
        if field.name in ("site", "item", "available_from", "currency", "best_before", "lot"):
            continue
        if isinstance(column, Decimals):
            rest += (column.present, column.values)
        else:
            rest.append(column.codes if isinstance(column, Texts) else column)
    return np.lexsort(
        (
            *reversed(rest),
            supply.lot.codes,
            np.where(best_before < 0, _LAST, best_before),
            *((supply.currency.codes,) if supply.currency.values else ()),
            _rank_of_cost(supply, items, worth),
            supply.available_from.codes,
            supply.item,
            supply.site,
        )
    )


def _rank_of_cost(
    supply: SupplyTable, items: Sequence[Item], worth: Mapping[str | None, Fraction]
) -> IntArray:
    """Return a number for each row that sorts as its unit cost per item unit does (absent: 0)."""
    keys = np.stack(
        (
            supply.item.astype(np.int64),
            supply.unit.codes.astype(np.int64),
            supply.unit_cost.values,
            supply.currency.codes.astype(np.int64),
        )
    )
    distinct, position = np.unique(keys, axis=1, return_inverse=True)
    costs = []
    for item, unit, value, currency in distinct.T.tolist():
        units = item_units(items[item], supply.unit.values[unit])
        if units is None:
            raise NormalFormError(
                f"{supply.unit.values[unit]!r} is no unit of item {items[item].id!r}"
            )
        own = None if currency < 0 else supply.currency.values[currency]
        # A currency without a rate is a fault of its own, and its row is in no plan.
        cost = Fraction(value, 10**supply.unit_cost.exponent) / units
        costs.append(cost * worth.get(own, Fraction(1)))
    rank_of = {cost: rank for rank, cost in enumerate(sorted(set(costs)))}
    ranks = np.array([rank_of[cost] for cost in costs], dtype=np.int64)
    return ranks[position.ravel()]


_Thing = TypeVar("_Thing", Item, Site)


def _sorted_by_id(things: Sequence[_Thing]) -> tuple[list[_Thing], CodeArray]:
    """Return the things by the bytes of their id, and for each former position the new one."""
    order = sorted(range(len(things)), key=lambda position: things[position].id.encode())
    places = np.empty(len(things), dtype=np.int32)
    places[order] = np.arange(len(things), dtype=np.int32)
    return [things[position] for position in order], places


def _normal_item(item: Item) -> Item:
    """Return ``item`` with packs, tags and extra sorted."""
    return replace(
        item,
        packs=tuple(sorted(item.packs, key=lambda pack: pack.unit.encode())),
        tags=tuple(sorted(item.tags)),
        extra=dict(sorted(item.extra.items())),
    )


def _normal_site(site: Site) -> Site:
    """Return ``site`` with handling costs, tags and extra sorted."""
    return replace(
        site,
        handling_cost=dict(sorted(site.handling_cost.items())),
        tags=tuple(sorted(site.tags)),
        extra=dict(sorted(site.extra.items())),
    )


def _normal_head(head: Mapping[str, Any]) -> dict[str, object]:
    """Return the head with absent fields left out and rules sorted by id."""
    normal = {key: value for key, value in sorted(head.items()) if value not in (None, {}, [])}
    normal["rules"] = sorted(head.get("rules") or (), key=rule_key)
    return normal


def rule_key(rule: Mapping[str, object]) -> tuple[bytes, bytes]:
    """Return what rules are sorted by: their id, and all that they say."""
    return str(rule.get("id", "")).encode(), canonical_json(rule)


def _spelled(table: _Table) -> _Table:
    """Return ``table`` with its texts and decimals in their one spelling."""
    changed: dict[str, object] = {}
    for field in fields(table):
        column = getattr(table, field.name)
        if isinstance(column, Texts):
            changed[field.name] = _spelled_texts(column)
        elif isinstance(column, Decimals):
            exponent, values = exponent_and_values(
                np.where(column.present, column.values, 0), column.exponent
            )
            changed[field.name] = replace(column, values=values, exponent=exponent)
    return replace(table, **changed)  # type: ignore[arg-type] # each of its field's own type


def _spelled_texts(column: Texts) -> Texts:
    """Return ``column`` with distinct, sorted values, each of them used."""
    used = np.bincount(column.codes[column.codes >= 0], minlength=len(column.values))
    values = sorted({text for text, count in zip(column.values, used, strict=True) if count})
    position = {text: place for place, text in enumerate(values)}
    # The last entry, -1, is where the code of an absent text (-1) leads.
    places = [position.get(text, -1) for text in column.values] + [-1]
    return Texts(codes=np.array(places, dtype=np.int32)[column.codes], values=tuple(values))


def _without_zeros(column: Decimals) -> Decimals:
    """Return ``column`` with every 0 made absent."""
    present: BoolArray = column.present & (column.values != 0)
    return replace(column, present=present)


def _in_order(table: _Table, order: IntArray) -> _Table:
    """Return the rows of ``table`` in ``order``."""
    return table if np.array_equal(order, np.arange(len(table))) else rows_at(table, order)
