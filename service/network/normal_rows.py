"""What a stored network must satisfy before anything is computed from it.

Not a second intake: this keeps a damaged or forged file from being taken for a network.
"""

import re
from collections.abc import Mapping, Sequence
from fractions import Fraction
from typing import Any

import numpy as np

from service.network.canonical_json import NotCanonicalError, canonical_json
from service.network.column_bytes import NormalFormError
from service.network.columns import (
    CodeArray,
    Decimals,
    DemandTable,
    Item,
    LaneTable,
    Network,
    SupplyTable,
    Texts,
)
from service.network.days import LAST_YEAR, TRANSIT_DAYS_MAX, is_dated
from service.network.moments import read_instant
from service.network.money import factors
from service.network.naming import rows_with_ids
from service.network.normal_form import lane_order, rule_key, supply_order
from service.network.normal_money import check_exchange_rates, check_money
from service.network.normal_rules import check_rule
from service.network.normal_tariffs import check_tariffs, check_tariffs_named
from service.network.normal_values import is_date, must
from service.network.storage import is_storage
from service.network.strict_json import StrictJsonError, strict_json
from service.network.units import item_units

# int32 codes count the rows of a table.
_ROWS_MAX = 2**31 - 1

# So many possible pairs are marked off one by one; more of them would cost more than sorting.
_PAIRS_MARKED_MAX = 2**22

_HEAD_TEXTS = ("name", "currency", "cut_off", "planned_at", "release_by", "shortage_measure")
_HEAD_FIELDS = frozenset(
    {"format", "periods", "storage", "rules", "extra", "exchange_rates", "tariffs"}
    | {"items", "sites", "tables", *_HEAD_TEXTS}
)
_COLUMN_FIELDS = frozenset({"type", "exponent", "of", "nulls", "digest"})
_CURRENCY = re.compile(r"[A-Z]{3}")


def check_head(head: Mapping[str, Any]) -> None:
    """Raise ``NormalFormError`` unless the head has the shape of one."""
    must(set(head) <= _HEAD_FIELDS, "an unknown field in the head")
    must(_is_whole(head.get("format")) and head["format"] == 1, "the head is not of format 1")
    for field in _HEAD_TEXTS:
        must(isinstance(head.get(field, ""), str), f"{field} is not text")
    must(_CURRENCY.fullmatch(head.get("currency", "")) is not None, "no currency")
    for field in ("cut_off", "planned_at"):
        if field in head or field == "cut_off":
            must(_is_moment(head.get(field)), f"{field} is no point in time")
    if "periods" in head:
        periods = head["periods"]
        must(isinstance(periods, list) and bool(periods), "periods is not an array")
        must(all(is_date(day) for day in periods), "a period is no date")
        must(periods == sorted(set(periods)), "periods are not sorted and distinct")
    for field in ("items", "sites", "rules"):
        must(isinstance(head.get(field), list), f"{field} is not an array")
    rules = head["rules"]
    must(all(isinstance(rule, dict) for rule in rules), "a rule is not an object")
    for rule in rules:
        check_rule(rule)
    must(rules == sorted(rules, key=rule_key), "rules are not sorted")
    must(len({rule["id"] for rule in rules}) == len(rules), "two rules have one id")
    if "extra" in head:
        must(_is_texts(head["extra"]) and bool(head["extra"]), "extra is not an object of text")
    check_exchange_rates(head)
    check_tariffs(head)
    tables = head.get("tables")
    must(isinstance(tables, dict) and set(tables) == {"supply", "demand", "lanes"}, "no tables")
    for described in head["tables"].values():
        _check_table(described)


def _check_table(described: object) -> None:
    """Raise unless a table is described by its rows and columns."""
    if not isinstance(described, dict) or set(described) != {"rows", "columns"}:
        raise NormalFormError("a table is not described by rows and columns")
    rows, columns = described["rows"], described["columns"]
    must(_is_whole(rows) and 0 <= rows <= _ROWS_MAX, "rows is not a count")
    must(isinstance(columns, dict), "columns is not an object")
    must(rows > 0 or not columns, "a table without rows has columns")
    for column in columns.values():
        must(isinstance(column, dict) and set(column) <= _COLUMN_FIELDS, "no column")
        must(isinstance(column.get("digest"), str), "a column has no digest")
        must(column.get("nulls", True) is True, "nulls is not true")
        must(_is_whole(column.get("exponent", 0)), "exponent is not a whole number")


def check_rows(network: Network) -> None:
    """Raise ``NormalFormError`` unless rows are sorted, distinct and make sense one by one."""
    check_money(network)
    check_tariffs_named(network)
    docks = {site.id for site in network.sites if "cross_dock" in site.roles}
    known = {site.id for site in network.sites}, docks, {item.id for item in network.items}
    if is_dated(network):
        lanes = network.lanes
        stated = [*lanes.closes.values, *lanes.departs.values, *lanes.arrives.values]
        periods: Any = network.head.get("periods", ())
        stated += [str(network.head["cut_off"]), *periods]
        must(all(text[:4] <= LAST_YEAR for text in stated), "a date beyond the calendar")
    if "storage" in network.head:
        must(is_storage(network.head["storage"], *known), "storage is not normal")
    _check_supply(network.supply, network.items, factors(network.head))
    _check_demand(network)
    _check_lanes(network.lanes, network.items)


def _check_supply(
    supply: SupplyTable, items: Sequence[Item], worth: Mapping[str | None, Fraction]
) -> None:
    """Raise unless supply rows are in order and their quantities are none below zero."""
    _check_units(supply.item, supply.unit, items)
    must(np.array_equal(supply_order(supply, items, worth), np.arange(len(supply))), "supply order")
    _check_required(supply.quantity)
    for column in (supply.on_hand, supply.reserved, supply.on_hold, supply.keep_quantity):
        _check_not_negative(column)
    kept = supply.keep_priority > 0
    must(np.array_equal(kept, supply.keep_quantity.present), "keep without its priority")
    pairs = supply.site[kept].astype(np.int64) * max(1, len(items)) + supply.item[kept]
    must(len(np.unique(pairs)) == len(pairs), "keep twice at one site and item")
    _check_dates(supply.available_from)
    _check_objects(supply.extra)


def _check_demand(network: Network) -> None:
    """Raise unless order lines are in order, distinct, and each is wanted in one way."""
    demand: DemandTable = network.demand
    _check_units(demand.item, demand.unit, network.items)
    must(bool((demand.reference[1:] > demand.reference[:-1]).all()), "demand order")
    must(not bool((demand.reference == b"").any()), "an order line without a reference")
    _check_required(demand.quantity)
    _check_not_negative(demand.shortage_cost)
    _check_not_negative(demand.worth_at_most)
    ways = (
        (demand.priority > 0).astype(np.int8)
        + demand.shortage_cost.present
        + demand.worth_at_most.present
    )
    must(not bool((ways > 1).any()), "an order line with two kinds of importance")
    for dates in (demand.earliest, demand.due, demand.latest):
        _check_dates(dates)
    _check_not_negative(demand.late_cost_per_day)
    late = demand.late_cost_per_day.present & (demand.due.codes < 0)
    must(not bool(late.any()), "a late cost without a date")
    known = {site.id for site in network.sites}
    for origins in _check_lists(demand.origins):
        must(set(origins) <= known, "an unknown site in origins")
    _check_lists(demand.tags)
    _check_objects(demand.extra)


def _check_lanes(lanes: LaneTable, items: Sequence[Item]) -> None:
    """Raise unless lanes are in order, distinct, and their limits are none below zero."""
    must(np.array_equal(lane_order(lanes), np.arange(len(lanes))), "lane order")
    must(not bool((lanes.origin == lanes.destination).any()), "a lane from a site to itself")
    named = lanes.ids[rows_with_ids(lanes)].tolist()
    must(len(set(named)) == len(named), "a lane id occurs twice")
    by_tariff = lanes.tariff.codes >= 0
    must(bool((lanes.unit_cost.present != by_tariff).all()), "a lane without one cost")
    must(not bool((by_tariff & (lanes.currency.codes >= 0)).any()), "a tariff in a currency")
    must(int(lanes.measure.codes.min(initial=0)) >= 0, "a lane without a measure")
    must(set(lanes.per.values) <= {"item", "together"}, "an unknown per")
    _check_not_negative(lanes.capacity)
    must(bool((lanes.must_ship.values[lanes.must_ship.present] > 0).all()), "a must-ship of 0")
    _check_not_negative(lanes.transit_days)
    must(lanes.transit_days.exponent == 0, "a part of a day")
    must(int(lanes.transit_days.values.max(initial=0)) <= TRANSIT_DAYS_MAX, "too many days")
    for moments in (lanes.closes, lanes.departs, lanes.arrives):
        must(all(_is_moment(text) for text in moments.values), "no point in time")
    lone = (lanes.departs.codes < 0) & ((lanes.closes.codes >= 0) | (lanes.arrives.codes >= 0))
    must(not bool(lone.any()), "an arrival without a departure")
    both = lanes.transit_days.present & (lanes.arrives.codes >= 0)
    must(not bool(both.any()), "two arrivals of a lane")
    own = lanes.item >= 0
    at = slice(None) if own.all() else own
    for item, measure in _pairs(lanes.item[at], lanes.measure.codes[at], lanes.measure):
        must(has_measure(items[item], measure), "an unknown measure")
    _check_lists(lanes.tags)
    _check_objects(lanes.extra)


def has_measure(item: Item, measure: str) -> bool:
    """Return whether ``item`` can be counted in ``measure``."""
    if measure == "weight_kg":
        return bool(item.weight_kg)
    if measure == "volume_m3":
        return bool(item.volume_m3)
    return measure == "unit" or any(pack.unit == measure for pack in item.packs)


def _check_units(item: CodeArray, unit: Texts, items: Sequence[Item]) -> None:
    """Raise unless each row's unit is one of its item's."""
    must(bool((unit.codes >= 0).all()), "a row without a unit")
    for place, text in _pairs(item, unit.codes, unit):
        must(item_units(items[place], text) is not None, "an unknown unit")


def _pairs(item: CodeArray, codes: CodeArray, texts: Texts) -> list[tuple[int, str]]:
    """Return the distinct pairs of an item's position and a text."""
    width = max(1, len(texts.values))
    pairs = item.astype(np.int64) * width + codes
    if len(pairs) and int(pairs.max()) < _PAIRS_MARKED_MAX:
        distinct = np.flatnonzero(np.bincount(pairs)).tolist()
    else:
        distinct = np.unique(pairs).tolist()
    return [(pair // width, texts.values[pair % width]) for pair in distinct]


def _check_required(column: Decimals) -> None:
    """Raise unless every row has a quantity of 0 or more."""
    must(bool(column.present.all()), "a row without a quantity")
    _check_not_negative(column)


def _check_not_negative(column: Decimals) -> None:
    """Raise if any value is below 0."""
    must(int(column.values.min(initial=0)) >= 0, "a negative quantity")


def _check_dates(column: Texts) -> None:
    """Raise unless every text is a calendar date."""
    must(all(is_date(text) for text in column.values), "no date")


def _is_moment(text: object) -> bool:
    """Return whether ``text`` is a point in time in its one spelling."""
    try:
        return isinstance(text, str) and read_instant(text).local == text
    except ValueError:
        return False


def _check_lists(column: Texts) -> list[list[str]]:
    """Return the arrays in ``column``; raise unless each holds sorted, distinct texts."""
    arrays = []
    for text in column.values:
        array = _parsed(text)
        if not isinstance(array, list) or not array:
            raise NormalFormError("not an array with elements")
        must(all(isinstance(element, str) for element in array), "not an array of text")
        must(array == sorted(set(array)), "an array is not sorted and distinct")
        arrays.append(array)
    return arrays


def _check_objects(column: Texts) -> None:
    """Raise unless each text of ``column`` is an object of texts."""
    for text in column.values:
        value = _parsed(text)
        must(_is_texts(value) and bool(value), "not an object of text")


def _parsed(text: str) -> object:
    """Return the value of canonical JSON."""
    try:
        value = strict_json(text.encode())
        canonical = canonical_json(value)
    except (StrictJsonError, NotCanonicalError) as error:
        raise NormalFormError("not canonical JSON") from error
    must(canonical == text.encode(), "not canonical JSON")
    return value


def _is_texts(value: object) -> bool:
    """Return whether ``value`` is an object whose members are all text."""
    return isinstance(value, dict) and all(isinstance(text, str) for text in value.values())


def _is_whole(value: object) -> bool:
    """Return whether ``value`` is a whole number of JSON."""
    return isinstance(value, int) and not isinstance(value, bool)
