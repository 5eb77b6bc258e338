"""Lanes with a tariff: which may be planned with, what they cost, and that no step should change.

Such a lane is one arc whose steps get dearer. A flow of n steps on it is right if the step after
them would not pay and the last of them does: the two conditions of complementary slackness for a
convex cost (Ahuja, Magnanti and Orlin, *Network Flows*, 1993, 14.3).
"""

from collections.abc import Mapping, Sequence
from dataclasses import replace
from fractions import Fraction
from functools import cache
from math import floor
from typing import Any

import numpy as np

from service.network.columns import BoolArray, IntArray, Network, Texts
from service.proof.arcs import ItemArcs
from service.proof.calendar import Calendar, date_of
from service.proof.exact import ROOM, Whole, magnitude, whole
from service.proof.freight import (
    Bill,
    bill,
    is_even,
    last_turn,
    measure_of_goods,
    rises,
)
from service.proof.money import in_plan_money
from service.proof.rulings import UnusableNetworkError
from service.proof.usable import usable_lanes

Document = Mapping[str, Any]


def on_days(calendar: Calendar) -> Calendar:
    """Return a calendar whose movements name the one tariff that holds when they leave.

    Such a name is the place of the tariff in the head. Raises ``UnusableNetworkError`` for a day
    on which none of that id holds.
    """
    network, lanes = calendar.network, calendar.network.lanes
    if not lanes.tariff.values:
        return calendar
    days = calendar.departs
    if days is None:
        days = np.full(len(lanes), calendar.today)
    head: Any = network.head
    tariffs: Sequence[Document] = head.get("tariffs", ())
    places: dict[tuple[int, int], int] = {}
    codes = np.full(len(lanes), -1, dtype=np.int32)
    for row in np.flatnonzero(lanes.tariff.codes >= 0).tolist():
        pair = int(lanes.tariff.codes[row]), int(days[row])
        if pair not in places:
            places[pair] = _place(tariffs, lanes.tariff.values[pair[0]], date_of(pair[1]))
        codes[row] = places[pair]
    names = tuple(str(place) for place in range(len(tariffs)))
    changed = replace(lanes, tariff=Texts(codes=codes, values=names))
    return replace(calendar, network=replace(network, lanes=changed))


def _place(tariffs: Sequence[Document], name: str, day: str) -> int:
    """Return which tariff of an id holds on a day."""
    for place, tariff in enumerate(tariffs):
        holds = tariff.get("valid_from", "") <= day <= tariff.get("valid_until", "9999-99")
        if tariff["id"] == name and holds:
            return place
    raise UnusableNetworkError(f"no tariff {name!r} holds on {day}")


class Freights:
    """The tariffs of a network whose lanes name them by their place (``on_days``)."""

    def __init__(self, network: Network) -> None:
        """Look up tariffs and their money."""
        self._network = network
        head: Any = network.head
        self._held: Sequence[Document] = head.get("tariffs", ())
        self._worth = [in_plan_money(network.head, tariff.get("currency")) for tariff in self._held]
        self.cost = cache(self._cost)

    def tariff(self, row: int) -> Document | None:
        """Return the tariff of a lane, None if it has a unit cost."""
        code = int(self._network.lanes.tariff.codes[row])
        return None if code < 0 else self._held[code]

    def of_step(self, code: int, item: int) -> Fraction:
        """Return how much of its tariff's measure one step of an item is."""
        thing = self._network.items[item]
        return measure_of_goods(self._held[code], [(thing, thing.step)])

    def bill(self, row: int, goods: list[tuple[int, int]]) -> Bill:
        """Return the freight of (item, steps) together."""
        items, tariff = self._network.items, self._held[self._network.lanes.tariff.codes[row]]
        load = [(items[item], steps * items[item].step) for item, steps in goods]
        return bill(tariff, measure_of_goods(tariff, load))

    def money(self, row: int, item: int, steps: int) -> Fraction:
        """Return what ``steps`` of an item pay on a lane, in the currency of the plan."""
        found: Fraction = self.cost(int(self._network.lanes.tariff.codes[row]), item, steps)
        return found

    def steepest(self, code: int, item: int, capacity: int) -> Fraction:
        """Return the most that a step can cost: the last that fits, or that for ever."""
        last = capacity
        if capacity < 0:
            of_step = self.of_step(code, item)
            last = int(last_turn(self._held[code]) / of_step) + 2 if of_step else 1
        return self._cost(code, item, last) - self._cost(code, item, max(0, last - 1))

    def check_usable(self) -> None:
        """Raise unless steps only get dearer, and items that share a lane do not meet in it."""
        lanes, items = self._network.lanes, self._network.items
        users = np.zeros(len(lanes), dtype=np.int64)
        heavy, bulky = np.zeros((2, len(lanes)), dtype=np.bool_)
        for item, thing in enumerate(items):
            rows = usable_lanes(self._network, item)
            codes = lanes.tariff.codes[rows]
            users[rows] += 1
            for code in np.unique(codes[codes >= 0]).tolist():
                tariff, here = self._held[code], rows[codes == code]
                if not rises(tariff, self.of_step(code, item)):
                    raise UnusableNetworkError(f"steps get cheaper by {tariff['id']!r}")
                if "kg_per_m3" in tariff:
                    dense = Fraction(tariff["kg_per_m3"]) * (thing.volume_m3 or 0)
                    heavy[here] |= (thing.weight_kg or 0) > dense
                    bulky[here] |= (thing.weight_kg or 0) < dense
        for code, tariff in enumerate(self._held):
            shared = (lanes.tariff.codes == code) & (users > 1)
            if is_even(tariff):
                shared &= heavy & bulky
            if shared.any():
                raise UnusableNetworkError(f"several items meet in {tariff['id']!r}")

    def _cost(self, code: int, item: int, steps: int) -> Fraction:
        """Return what steps of an item cost by a tariff, in the currency of the plan."""
        measured = steps * self.of_step(code, item)
        return bill(self._held[code], measured).amount * self._worth[code]


def freights_of(network: Network) -> Freights | None:
    """Return the tariffs in use, None where there are none."""
    return Freights(network) if network.lanes.tariff.values else None


def with_tariffs(rows: IntArray, network: Network) -> BoolArray:
    """Return which of the lanes ``rows`` have a tariff."""
    found: BoolArray = network.lanes.tariff.codes[rows] >= 0
    return found


def steepest_costs(
    freights: Freights, arcs: ItemArcs, network: Network, scale: Fraction
) -> tuple[IntArray, list[Fraction]]:
    """Return the lanes with a tariff by position, and the dearest step of each, scaled."""
    at = np.flatnonzero(with_tariffs(arcs.rows, network))
    codes = network.lanes.tariff.codes[arcs.rows[at]].tolist()
    most = arcs.limits.capacity[at].tolist()
    known: dict[tuple[int, int], Fraction] = {}
    for pair in zip(codes, most, strict=True):
        if pair not in known:
            known[pair] = freights.steepest(pair[0], arcs.item, pair[1]) * scale
    return at, [known[pair] for pair in zip(codes, most, strict=True)]


def tariff_contradictions(  # noqa: PLR0913 - flow and prices, and what they are compared with
    freights: Freights,
    network: Network,
    arcs: ItemArcs,
    flow: Whole,
    *,
    price: Whole,
    charges: Mapping[int, Fraction],
    scale: Fraction,
) -> list[int]:
    """Return the lanes with a tariff, by position, on which a step more or less would pay.

    ``charges`` are those of a step by code of their column (-1: none), in the plan's money.
    """
    lanes = network.lanes
    at = np.flatnonzero(with_tariffs(arcs.rows, network))
    busy = flow[at] != 0
    idle = _idle(freights, network, arcs, at[~busy], price=price, charges=charges, scale=scale)
    at = at[busy]
    rows = arcs.rows[at]
    columns = zip(
        at.tolist(),
        lanes.tariff.codes[rows].tolist(),
        lanes.charges.codes[rows].tolist(),
        flow[at].tolist(),
        arcs.limits.minimum[at].tolist(),
        arcs.limits.capacity[at].tolist(),
        price[arcs.lane_tail[at]].tolist(),
        price[arcs.lane_head[at]].tolist(),
        strict=True,
    )
    found = []
    for position, code, charge, steps, least, most, before, behind in columns:
        cost = freights.cost(code, arcs.item, steps)
        paid = (behind - before) / scale - charges[charge]
        if (steps != most and freights.cost(code, arcs.item, steps + 1) - cost < paid) or (
            steps > least and cost - freights.cost(code, arcs.item, steps - 1) > paid
        ):
            found.append(position)
    return idle + found


def _idle(  # noqa: PLR0913 - see above
    freights: Freights,
    network: Network,
    arcs: ItemArcs,
    at: IntArray,
    *,
    price: Whole,
    charges: Mapping[int, Fraction],
    scale: Fraction,
) -> list[int]:
    """Return the lanes without flow, by position, on which a first step would pay.

    They are nearly all, so that those of one tariff and charge are looked at together.
    """
    at = at[arcs.limits.capacity[at] != 0]
    rows = arcs.rows[at]
    kinds = np.stack((network.lanes.tariff.codes[rows], network.lanes.charges.codes[rows]))
    distinct, kind = np.unique(kinds, axis=1, return_inverse=True)
    # Prices are whole, so that more than a cost is more than its whole part.
    most = whole(
        [
            floor((freights.cost(code, arcs.item, 1) + charges[charge]) * scale)
            for code, charge in distinct.T.tolist()
        ]
    )
    gain = price[arcs.lane_head[at]].astype(object) - price[arcs.lane_tail[at]]
    if magnitude(price) < ROOM // 2:
        gain = gain.astype(np.int64)
    found: list[int] = at[(gain > most[kind.ravel()]).astype(np.bool_)].tolist()
    return found
