"""What lanes and stock cost in the currency of the plan, worked out from head and columns alone."""

import json
from collections.abc import Mapping
from fractions import Fraction
from typing import Any, NamedTuple

import numpy as np

from service.network.columns import IntArray, Item, Network
from service.network.units import per_unit
from service.proof.numbers import Numbers, numbers_of
from service.proof.rulings import UnusableNetworkError

_MEASURES = {"weight": "weight_kg", "volume": "volume_m3"}


class Due(NamedTuple):
    """A charge that is due for an item: in its own currency (None: the plan's), per item unit."""

    name: str
    currency: str | None
    per_unit: Fraction


class LaneKind(NamedTuple):
    """Lanes alike in measure, currency and charges: their places, and what they cost.

    A lane costs ``rate`` times the value of its column, and ``charges``, for one item unit.
    """

    places: IntArray
    rate: Fraction
    charges: Fraction


def in_plan_money(head: Mapping[str, Any], currency: str | None) -> Fraction:
    """Return what one unit of a currency is in that of the plan (None)."""
    if currency is None:
        return Fraction(1)
    for entry in head.get("exchange_rates", ()):
        if entry["currency"] == currency:
            return Fraction(entry["rate"]) / Fraction(entry.get("per", "1"))
    raise UnusableNetworkError(f"there is no exchange rate of {currency}")


def charges_due(text: str | None, item: Item) -> list[Due]:
    """Return the charges that a lane's column states and that are due for ``item``."""
    due = []
    for charge in json.loads(text) if text else ():
        if item.id not in charge.get("items", (item.id,)):
            continue
        if "percent" in charge:
            amount = None if item.value is None else item.value * Fraction(charge["percent"]) / 100
        else:
            of_unit = per_unit(item, _MEASURES.get(charge["basis"], charge["basis"]))
            amount = None if of_unit is None else of_unit * Fraction(charge["rate"])
        if amount is None:
            raise UnusableNetworkError(f"item {item.id!r} cannot be charged {charge['name']}")
        due.append(Due(charge["name"], charge.get("currency"), amount))
    return due


def lane_kinds(network: Network, item: int, rows: IntArray) -> list[LaneKind]:
    """Return the lanes ``rows`` by what decides their cost; places are positions in ``rows``."""
    lanes, thing, head = network.lanes, network.items[item], network.head
    columns = (lanes.measure.codes[rows], lanes.currency.codes[rows], lanes.charges.codes[rows])
    sizes = [len(column.values) + 1 for column in (lanes.measure, lanes.currency, lanes.charges)]
    key = np.zeros(len(rows), dtype=np.int64)
    for codes, size in zip(columns, sizes, strict=True):
        key = key * size + codes + 1
    order = np.argsort(key, kind="stable")
    parts = np.split(order, np.flatnonzero(np.diff(key[order])) + 1) if len(rows) else []
    kinds = []
    for places in parts:
        row = int(rows[places[0]])
        measure = lanes.measure.text(row)
        of_unit = None if measure is None else per_unit(thing, measure)
        if of_unit is None:
            raise UnusableNetworkError(f"a lane has no cost for {thing.id!r}")
        worth = in_plan_money(head, lanes.currency.text(row))
        due = charges_due(lanes.charges.text(row), thing)
        charges = sum(
            (one.per_unit * in_plan_money(head, one.currency) for one in due), Fraction(0)
        )
        kinds.append(LaneKind(places, of_unit * worth / 10**lanes.unit_cost.exponent, charges))
    return kinds


def charges_by_code(network: Network, item: int, rows: IntArray) -> dict[int, Fraction]:
    """Return what a unit of ``item`` is charged on ``rows``, by code of the column (-1: none)."""
    found = {-1: Fraction(0)}
    charges = network.lanes.charges
    for code in np.unique(charges.codes[rows]).tolist():
        due = charges_due(None if code < 0 else charges.values[code], network.items[item])
        money = (one.per_unit * in_plan_money(network.head, one.currency) for one in due)
        found[code] = sum(money, Fraction(0))
    return found


def unit_costs(network: Network, rows: IntArray, item: int) -> tuple[Numbers, Numbers]:
    """Return transport and charges of one unit of ``item`` on each of the lanes ``rows``."""
    kinds = lane_kinds(network, item, rows)
    rates, charges = numbers_of(k.rate for k in kinds), numbers_of(k.charges for k in kinds)
    values = network.lanes.unit_cost.values[rows].tolist()
    transport, charged = [0] * len(rows), [0] * len(rows)
    for kind, rate, charge in zip(kinds, rates.whole, charges.whole, strict=True):
        for place in kind.places.tolist():
            transport[place] = values[place] * rate
            charged[place] = charge
    return Numbers(whole=transport, below=rates.below), Numbers(whole=charged, below=charges.below)


def check_costs_known(network: Network, item: int, rows: IntArray) -> None:
    """Raise ``UnusableNetworkError`` unless every charge and currency on ``rows`` has its money."""
    if not is_plain(network):
        lane_kinds(network, item, rows)


def is_plain(network: Network) -> bool:
    """Return whether lanes cost no more than their rate in the currency of the plan."""
    lanes = network.lanes
    return not (lanes.currency.values or lanes.charges.values or lanes.tariff.values)
