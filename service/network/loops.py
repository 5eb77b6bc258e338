"""Loops of lanes whose costs, handling included, add up to less than zero.

Goods could circle there for ever and earn money each time, so no plan would be the cheapest. Only
cross-docks pass goods on, so a loop runs over lanes between cross-docks alone. Method: shortest
walks from everywhere at once (Bellman 1958, Ford 1956), all lanes in one array operation a round.
A loop in the graph of "where the shortest walk came from" is a loop below zero: along it each price
is at least the one before plus the cost between, and more than that where a price fell last. Exact.
"""

from fractions import Fraction
from math import lcm
from typing import Any

import numpy as np
from numpy.typing import NDArray

from service.network.columns import IntArray, Network
from service.network.lane_freight import freight_runs
from service.network.lane_rates import lane_rates
from service.network.reach import LaneUse
from service.network.tariffs import departure_day

# int64, or Python integers where a sum of as many costs as a loop has sites could leave 64 bits.
_Costs = NDArray[Any]


def loop_below_zero(network: Network, use: LaneUse, item: int) -> IntArray | None:
    """Return the lanes (rows) of a loop below zero that ``item`` can go, in order; None if none."""
    lanes, on = network.lanes, use.passes_on
    if not on.any():
        return None
    rows = use.rows(item)
    rows = rows[on[lanes.origin[rows]] & on[lanes.destination[rows]]]
    rows, costs = _costs(network, rows, item)
    if len(rows) == 0 or costs.min() >= 0:
        return None
    # Of lanes that join the same two sites only the cheapest matters. Rows end up by destination.
    order = np.argsort(costs, kind="stable")
    order = order[np.lexsort((lanes.origin[rows[order]], lanes.destination[rows[order]]))]
    rows, costs = rows[order], costs[order]
    first = np.ones(len(rows), dtype=np.bool_)
    first[1:] = (np.diff(lanes.origin[rows]) != 0) | (np.diff(lanes.destination[rows]) != 0)
    rows, costs = rows[first], costs[first]
    found = _loop(lanes.origin[rows], lanes.destination[rows], costs, sites=len(network.sites))
    return None if found is None else rows[found]


def _costs(network: Network, rows: IntArray, item: int) -> tuple[IntArray, _Costs]:
    """Return the lanes that can be priced, and what each costs per item unit, in one whole scale.

    A lane in a measure that the item does not have is left out: that is a fault of its own.
    """
    lanes, thing = network.lanes, network.items[item]
    found = lane_rates(network, item, rows)
    pairs = list(zip(found.rates, found.charges, strict=True))
    known = np.array([None not in pair for pair in pairs], dtype=np.bool_)
    sound = known[found.codes]
    rows, codes = rows[sound], found.codes[sound]
    if len(rows) == 0:
        return rows, np.zeros(0, dtype=np.int64)
    rates = [rate or Fraction(0) for rate, _ in pairs]
    charges = [charge or Fraction(0) for _, charge in pairs]
    # What the first step costs: on a loop below zero that is where it begins.
    step = Fraction(thing.step)
    runs = freight_runs(network, item, departure_day(network.head))
    first = [
        runs[code][0].money / step if code in runs else Fraction(0)
        for code in range(len(lanes.tariff.values))
    ]
    handling = [site.handling(thing.id) for site in network.sites]
    scale = lcm(*(number.denominator for number in (*rates, *charges, *first, *handling)))
    rate = [int(number * scale) for number in rates]
    charge = [int(number * scale) for number in charges]
    extra = [int(number * scale) for number in handling]
    values = lanes.unit_cost.values[rows]
    largest = int(np.abs(values).max()) * max(map(abs, rate)) + max(map(abs, extra)) + max(charge)
    largest += max(int(money * scale) for money in (*first, Fraction(0)))
    kind: Any = np.int64 if largest * 2 * (len(network.sites) + 1) < 2**62 else object
    costs: _Costs = values.astype(kind) * np.array(rate, dtype=kind)[codes]
    if any(charge):
        costs += np.array(charge, dtype=kind)[codes]
    if first:
        # Code -1, no tariff, finds the last entry.
        freight = [*(int(money * scale) for money in first), 0]
        costs += np.array(freight, dtype=kind)[lanes.tariff.codes[rows]]
    return rows, costs + np.array(extra, dtype=kind)[lanes.destination[rows]]


def _loop(
    tails: NDArray[np.int32], heads: NDArray[np.int32], costs: _Costs, *, sites: int
) -> list[int] | None:
    """Return the positions of the lanes of a loop below zero, in order; lanes come by head."""
    starts = np.flatnonzero(np.concatenate(([True], np.diff(heads) != 0)))
    places = heads[starts]
    group = np.cumsum(np.concatenate(([0], (np.diff(heads) != 0).astype(np.int64))))
    price: _Costs = np.zeros(sites, dtype=costs.dtype)
    came_by = np.full(sites, -1, dtype=np.int64)
    # A walk that repeats no site takes at most one round for each site that a lane leads to.
    for _ in range(len(places) + 1):
        walks = price[tails] + costs
        least = np.minimum.reduceat(walks, starts)
        better = least < price[places]
        if not better.any():
            return None
        best = np.flatnonzero(better[group] & (walks == least[group]))
        _, which = np.unique(group[best], return_index=True)
        came_by[heads[best[which]]] = best[which]
        walked = _along(tails, costs, came_by, price)
        if walked is None:
            return _closed_walk(tails, came_by)
        price = walked
    raise AssertionError("walks got shorter for ever, yet there is no loop")


def _along(
    tails: NDArray[np.int32], costs: _Costs, came_by: IntArray, price: _Costs
) -> _Costs | None:
    """Return the length of each walk as it now is, back to where it begins; None if it never does.

    Long rows of sites are priced in one round instead of a round for each: sums are taken over
    2, 4, 8 ... steps back.
    """
    sites = len(came_by)
    # One more place, which leads to itself at no cost, stands for "the walk begins here".
    before = np.append(np.where(came_by >= 0, tails[came_by].astype(np.int64), sites), sites)
    length: _Costs = np.append(np.where(came_by >= 0, costs[came_by], price), costs[:1] * 0)
    for _ in range(sites.bit_length()):
        length = length + length[before]
        before = before[before]
    return None if bool((before[:-1] < sites).any()) else length[:-1]


def _closed_walk(tails: NDArray[np.int32], came_by: IntArray) -> list[int]:
    """Return the lanes of a loop in the graph of where walks came from, which has one, in order."""
    order: dict[int, int] = {}
    for start in np.flatnonzero(came_by >= 0).tolist():
        walk: list[int] = []
        place = start
        while came_by[place] >= 0 and place not in order:
            order[place] = start
            walk.append(place)
            place = int(tails[came_by[place]])
        if came_by[place] >= 0 and order[place] == start:
            loop = walk[walk.index(place) :]
            return [int(came_by[site]) for site in reversed(loop)]
    raise AssertionError("a walk without a beginning, yet no loop")
