"""Random freight tariffs on random networks, and what shipments cost by them, written once more.

The pricing here goes by its definition in words, break by break and step by step: it is slow, and
shares nothing with the code that it judges.
"""

import copy
from collections.abc import Mapping
from dataclasses import replace
from fractions import Fraction
from itertools import groupby, pairwise
from math import ceil, floor
from random import Random
from typing import Any

from tests.factories import Document
from tests.oracle_problem import ItemProblem
from tests.random_money import of_one

BASES = ("unit", "weight", "volume", "chargeable_weight", "pallet", "layer")
CUT_OFF_DAY = "2026-02-03"


def measured(tariff: Mapping[str, Any], item: Mapping[str, Any], quantity: Fraction) -> Fraction:
    """Return how much of a tariff's basis ``quantity`` of one item is."""
    weight = Fraction(item.get("weight_kg", "0")) * quantity
    volume = Fraction(item.get("volume_m3", "0")) * quantity
    packs = {pack["unit"]: Fraction(pack["contains"]) for pack in item.get("packs", ())}
    basis = tariff["basis"]
    if basis == "unit":
        return quantity
    if basis == "weight":
        return weight
    if basis == "volume":
        return volume
    if basis == "chargeable_weight":
        return max(weight, Fraction(tariff["kg_per_m3"]) * volume)
    return quantity / packs[basis]


def shipment_costs(tariff: Mapping[str, Any], amount: Fraction) -> Fraction:
    """Return the freight of ``amount`` of the basis, in the tariff's own currency."""
    if amount == 0:
        return Fraction(0)
    if "round_up_to" in tariff:
        grid = Fraction(tariff["round_up_to"])
        amount = ceil(amount / grid) * grid
    breaks = [(Fraction(one["from"]), Fraction(one["rate"])) for one in tariff["breaks"]]
    if tariff.get("break_type", "incremental") == "incremental":
        cost = Fraction(0)
        ends = [start for start, _ in breaks[1:]] + [None]
        for (start, rate), end in zip(breaks, ends, strict=True):
            if amount > start:
                cost += rate * ((amount if end is None else min(amount, end)) - start)
    elif tariff.get("pay_up"):
        cost = min(rate * max(amount, start) for start, rate in breaks)
    else:
        cost = next(rate for start, rate in reversed(breaks) if start <= amount) * amount
    cost = max(cost, Fraction(tariff.get("minimum_charge", "0")))
    cost *= 1 + Fraction(tariff.get("surcharge_percent", "0")) / 100
    if "round_money" in tariff:
        cent = Fraction(tariff["round_money"])
        whole = floor(cost / cent)
        cost = (whole + (1 if (cost / cent - whole) * 2 >= 1 else 0)) * cent
    return cost


def draw_tariff(rng: Random, number: int, *, rising: bool) -> dict[str, Any]:
    """Draw a tariff; a ``rising`` one gets dearer with every break, and nothing bends it."""
    count = rng.choice([1, 2, 2, 3])
    starts = [Fraction(0)]
    for _ in range(count - 1):
        starts.append(starts[-1] + Fraction(rng.randint(1, 120), rng.choice([1, 1, 2, 4])))
    rates = [Fraction(rng.randint(0, 400), 100) for _ in range(count)]
    tariff: dict[str, Any] = {
        "id": f"T{number}",
        "basis": rng.choice(BASES),
        "breaks": [
            {"from": str(float(start)), "rate": str(float(rate))}
            for start, rate in zip(starts, sorted(rates) if rising else rates, strict=True)
        ],
    }
    if count > 1:
        tariff["break_type"] = "incremental" if rising or rng.random() < 0.4 else "all_units"
    if tariff["basis"] == "chargeable_weight":
        tariff["kg_per_m3"] = rng.choice(["333", "167", "1000"])
    if rng.random() < 0.3:
        tariff["surcharge_percent"] = rng.choice(["12.5", "-10", "3"])
    if rng.random() < 0.3:
        tariff |= {"valid_from": "2026-01-01", "valid_until": CUT_OFF_DAY, "version": "A"}
    if not rising:
        if tariff.get("break_type") == "all_units" and rng.random() < 0.5:
            tariff["pay_up"] = True
        for field, values in (
            ("minimum_charge", ["5", "40.5"]),
            ("round_up_to", ["1", "0.5", "100"]),
            ("round_money", ["0.01", "0.5"]),
        ):
            if rng.random() < 0.25:
                tariff[field] = rng.choice(values)
    return tariff


def by_tariffs(document: Document, rng: Random, *, share: float = 0.5) -> Document:
    """Return ``document`` with rising tariffs on some of its lanes, each of one item.

    A lane that any item could use keeps its cost, or gets a tariff without breaks.
    """
    stated = copy.deepcopy(document)
    items = {item["id"]: item for item in stated["items"]}
    tariffs = [draw_tariff(rng, number, rising=True) for number in range(8)]
    for tariff in tariffs:
        if "exchange_rates" in stated and rng.random() < 0.4:
            tariff["currency"] = rng.choice(stated["exchange_rates"])["currency"]
    used: set[str] = set()
    for lane in stated["lanes"]:
        tariff = rng.choice(tariffs)
        users = [items[lane["item"]]] if "item" in lane else list(items.values())
        packs = [{pack["unit"] for pack in item.get("packs", ())} for item in users]
        known = tariff["basis"] not in {"pallet", "layer"} or all(
            tariff["basis"] in units for units in packs
        )
        even = len(tariff["breaks"]) == 1 and tariff["basis"] != "chargeable_weight"
        if rng.random() < share and known and (len(users) == 1 or even):
            del lane["unit_cost"]
            lane.pop("currency", None)
            lane["tariff"] = tariff["id"]
            # Lanes that differ in their tariff alone have no names of their own.
            lane.setdefault("id", f"lane {len(used)}")
            used.add(lane["id"])
    stated["tariffs"] = tariffs
    return stated


def of_several_days(document: Document, rng: Random) -> Document:
    """Return a document by tariffs, some of which are dearer from the day after the cut-off on."""
    stated = by_tariffs(document, rng, share=0.9)
    for tariff in list(stated["tariffs"]):
        for field in ("valid_from", "valid_until", "version"):
            tariff.pop(field, None)
        if rng.random() < 0.5:
            later = copy.deepcopy(tariff)
            later |= {"valid_from": "2026-02-04", "version": "later"}
            for one in later["breaks"]:
                one["rate"] = str(round(2 * float(one["rate"]), 2))
            tariff["valid_until"] = CUT_OFF_DAY
            stated["tariffs"].append(later)
    return stated


def with_segments(problem: ItemProblem, document: Document) -> ItemProblem:
    """Return a problem in which each lane with a tariff is one lane for each price of a step.

    What each further step costs is the difference of two shipments, up to all that can move.
    """
    tariffs = {tariff["id"]: tariff for tariff in document["tariffs"]}
    rates = {one["currency"]: of_one(one) for one in document.get("exchange_rates", ())}
    item = next(one for one in document["items"] if one["id"] == problem.item)
    most = sum(stock.steps for stock in problem.stocks) + sum(lane.least for lane in problem.lanes)
    lanes = []
    for lane in problem.lanes:
        tariff = tariffs.get(document["lanes"][lane.row].get("tariff"))
        if tariff is None:
            lanes.append(lane)
            continue
        worth = rates.get(tariff.get("currency"), Fraction(1))
        end = most if lane.most is None else min(most, lane.most)
        costs = [
            shipment_costs(tariff, measured(tariff, item, steps * problem.step)) * worth
            for steps in range(max(end, lane.least) + 1)
        ]
        for cost, group in groupby(pairwise(costs), key=lambda pair: pair[1] - pair[0]):
            width = len(list(group))
            done = sum(one.most or 0 for one in lanes if one.row == lane.row)
            least = min(width, max(0, lane.least - done))
            lanes.append(replace(lane, cost=cost, least=least, most=width))
        if len(costs) == 1:
            lanes.append(replace(lane, cost=Fraction(0), most=0))
    return replace(problem, lanes=tuple(lanes))


def as_costs(document: Document) -> Document:
    """Return a document in which lanes with a tariff cost nothing, for readers that know none."""
    plain = copy.deepcopy(document)
    for lane in plain["lanes"]:
        if lane.pop("tariff", None) is not None:
            lane["unit_cost"] = "0"
    return plain
