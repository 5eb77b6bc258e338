"""Limits that items share: what each counts, how much it may come to, and what a plan comes to.

Written without a look at how planning builds its rows. A limit counts what lanes carry of some
items in one measure and, where it is about what passes a site, what is drawn there.
"""

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from service.network.columns import BoolArray, IntArray, Network
from service.network.naming import lane_rows
from service.network.rules import Closure, SharedCapacity, Throughput
from service.network.units import per_unit
from service.proof.arcs import ItemArcs
from service.proof.exact import Whole, sums_at, times
from service.proof.rulings import Ruling, Rulings, UnusableNetworkError
from service.proof.usable import of_rows
from service.proof.violations import Findings

# What a limit is called: rule, site, lane; those that it is not about are None.
Name = tuple[str | None, str | None, str | None]


@dataclass(frozen=True, slots=True, kw_only=True)
class Family:
    """The limits of one rule, or of all lanes with one measure, numbered by ``key``.

    ``lane`` and ``stock`` say which limit a lane and what is drawn at a site count to (-1: none);
    ``numbers`` is how many grains of the measure one step of each item is. ``least`` and ``most``
    are in whole grains, None where there is none: all that counts is a multiple of a grain.
    """

    rule: str | None
    by: str
    grain: Fraction
    numbers: Mapping[int, int]
    lane: IntArray
    stock: IntArray
    things: IntArray
    least: Sequence[int | None]
    most: Sequence[int | None]
    # Items that the limits are about, but that say nothing of the measure.
    unknown: frozenset[int] = frozenset()

    @property
    def counts_stock(self) -> bool:
        """Whether what is drawn counts."""
        return bool((self.stock >= 0).any())

    def counted(self, arcs: ItemArcs) -> tuple[IntArray, IntArray, int]:
        """Return positions of the arcs of an item that count, to which limit, and how much each."""
        keys = of_rows(self.lane, arcs.rows)
        on_lanes = np.flatnonzero(keys >= 0)
        if arcs.item in self.unknown and len(on_lanes):
            raise UnusableNetworkError("an item says nothing of the measure of a limit")
        number = self.numbers.get(arcs.item, 0)
        if number == 0:
            none = np.zeros(0, dtype=np.int64)
            return none, none, 0
        drawn = [
            (len(arcs.rows) + position, int(self.stock[int(str(arc.key[0]))]))
            for position, arc in enumerate(arcs.arcs if self.counts_stock else ())
            if arc.kind == "draw" and self.stock[int(str(arc.key[0]))] >= 0
        ]
        others = np.array(drawn, dtype=np.int64).reshape(len(drawn), 2)
        return (
            np.concatenate((on_lanes, others[:, 0])),
            np.concatenate((keys[on_lanes], others[:, 1])),
            number,
        )


def shares_limits(network: Network, rulings: Rulings) -> bool:
    """Return whether anything in the network may be a limit that items share."""
    rules = any(isinstance(ruling.rule, SharedCapacity | Throughput) for ruling in rulings.rulings)
    return rules or "together" in network.lanes.per.values


def families_of(network: Network, rulings: Rulings) -> list[Family]:
    """Return all limits that several lanes or items count to, whether or not a plan feels them."""
    found = list(_of_lanes(network, rulings))
    found += [
        _of_rule(network, ruling, ruling.rule)
        for ruling in rulings.rulings
        if isinstance(ruling.rule, SharedCapacity | Throughput)
    ]
    return found


def _of_lanes(network: Network, rulings: Rulings) -> Iterator[Family]:
    """Yield the limits that lanes state for all items together."""
    lanes = network.lanes
    shared = (lanes.item == -1) & np.array(
        [*(word == "together" for word in lanes.per.values), False], dtype=np.bool_
    )[lanes.per.codes]
    shared &= lanes.capacity.present | lanes.must_ship.present
    everything = np.ones(len(network.items), dtype=np.bool_)
    for code in np.flatnonzero(np.bincount(lanes.measure.codes[shared])).tolist():
        rows = np.flatnonzero(shared & (lanes.measure.codes == code))
        grain, numbers = _grains(network, lanes.measure.values[code], everything)
        if not numbers:
            continue
        key = np.full(len(lanes), -1, dtype=np.int64)
        key[rows] = np.arange(len(rows))
        open_for = _open_lanes(network, rulings, numbers)
        least: list[int | None] = []
        most: list[int | None] = []
        for row in rows.tolist():
            must, capacity = lanes.must_ship.fraction(row), lanes.capacity.fraction(row)
            # What is closed for all need not carry anything.
            least.append(None if must is None or not open_for[row] else math.ceil(must / grain))
            most.append(None if capacity is None else math.floor(capacity / grain))
        yield Family(
            rule=None,
            by="lane",
            grain=grain,
            numbers=numbers,
            lane=key,
            stock=np.full(len(network.sites), -1, dtype=np.int64),
            things=rows,
            least=least,
            most=most,
        )


def _open_lanes(network: Network, rulings: Rulings, numbers: Mapping[int, int]) -> BoolArray:
    """Return, in shape (lanes,), which lanes no closure closes for all items at once."""
    closed_for = np.zeros(len(network.lanes), dtype=np.int64)
    for item in numbers:
        closed = np.zeros(len(network.lanes), dtype=np.bool_)
        for ruling in rulings.rulings:
            if isinstance(ruling.rule, Closure) and ruling.items[item]:
                closed |= ruling.lanes
        closed_for += closed
    open_for: BoolArray = closed_for < len(numbers)
    return open_for


def _of_rule(network: Network, ruling: Ruling, rule: SharedCapacity | Throughput) -> Family:
    """Return the limits of one rule."""
    lanes, sites = network.lanes, len(network.sites)
    grain, numbers = _grains(network, rule.measure, ruling.items)
    about_sites = isinstance(rule, Throughput)
    picked = ruling.sites if about_sites else ruling.lanes
    key = np.where(picked, 0, -1)
    things = np.zeros(1, dtype=np.int64)
    if rule.per == "each":
        things = np.flatnonzero(picked)
        key = np.where(picked, np.cumsum(picked) - 1, -1)
    lane = key
    stock = np.full(sites, -1, dtype=np.int64)
    if isinstance(rule, Throughput):
        lane = key[lanes.origin if rule.flow == "sent" else lanes.destination]
        stock = key if rule.flow == "through" else stock
    most = math.floor(rule.maximum / grain) if numbers else None
    return Family(
        rule=rule.id,
        by=("site" if about_sites else "lane") if rule.per == "each" else "all",
        grain=grain,
        numbers=numbers,
        lane=lane,
        stock=stock,
        things=things,
        least=[None] * len(things),
        most=[most] * len(things),
        unknown=frozenset(np.flatnonzero(ruling.items).tolist()) - numbers.keys(),
    )


def _grains(network: Network, measure: str, picked: BoolArray) -> tuple[Fraction, dict[int, int]]:
    """Return the largest part of a measure that steps of all picked items are multiples of."""
    amounts = {}
    for item in np.flatnonzero(picked).tolist():
        per = per_unit(network.items[item], measure)
        if per is not None and per > 0:
            amounts[item] = per * network.items[item].step
    below = math.lcm(1, *(amount.denominator for amount in amounts.values()))
    whole = {item: int(amount * below) for item, amount in amounts.items()}
    divisor = math.gcd(*whole.values()) or 1
    return Fraction(divisor, below), {item: number // divisor for item, number in whole.items()}


class SharedLimits:
    """All shared limits of a network, found by name."""

    def __init__(self, network: Network, rulings: Rulings) -> None:
        """Find them."""
        self._network = network
        self.families = families_of(network, rulings)
        self._rules = {family.rule: family for family in self.families if family.rule is not None}

    def find(self, names: Sequence[Name]) -> list[tuple[Family, int] | None]:
        """Return family and number of each limit, None where nothing is called so."""
        named = [lane for _, _, lane in names if lane is not None]
        rows = iter(lane_rows(self._network, named))
        sites = {site.id: place for place, site in enumerate(self._network.sites)}
        found: list[tuple[Family, int] | None] = []
        for rule, site, lane in names:
            row = -1 if lane is None else next(rows)
            place = sites.get(site, -1) if site is not None else -1
            found.append(self._find(rule, site=place, lane=row, by=_by(site, lane)))
        return found

    def _find(
        self, rule: str | None, *, site: int, lane: int, by: str
    ) -> tuple[Family, int] | None:
        """Return family and number of one limit."""
        if rule is None:
            own = [family for family in self.families if family.rule is None]
        else:
            own = [self._rules[rule]] if rule in self._rules else []
        for family in own:
            if family.by != by:
                continue
            if by == "all":
                return family, 0
            thing = site if by == "site" else lane
            number = int(np.searchsorted(family.things, thing))
            if number < len(family.things) and family.things[number] == thing:
                return family, number
        return None

    def check(self, flows: Sequence[tuple[ItemArcs, Whole]], findings: Findings) -> None:
        """Note every limit that the flow of all items breaks."""
        for family in self.families:
            sums = activity(family, flows)
            for number in np.flatnonzero(_out_of_bounds(family, sums)).tolist():
                place = family.rule or "lanes"
                if family.by == "site":
                    place += f": {self._network.sites[int(family.things[number])].id}"
                elif family.by == "lane":
                    place += f": lane {int(family.things[number])}"
                findings.add("limit_broken", "a limit that items share", place=place)


def activity(family: Family, flows: Sequence[tuple[ItemArcs, Whole]]) -> Whole:
    """Return what each limit of a family comes to, in grains."""
    sums: Whole = np.zeros(len(family.things), dtype=object)
    for arcs, flow in flows:
        positions, keys, number = family.counted(arcs)
        if number:
            moved = np.flatnonzero(flow[positions] != 0)
            carried = times(flow[positions[moved]], number)
            sums = sums + sums_at(len(family.things), keys[moved], carried).astype(object)
    return sums


def _out_of_bounds(family: Family, sums: Whole) -> BoolArray:
    """Return which limits are broken."""
    return np.array(
        [
            (most is not None and value > most) or (least is not None and value < least)
            for value, least, most in zip(sums.tolist(), family.least, family.most, strict=True)
        ],
        dtype=np.bool_,
    )


def _by(site: str | None, lane: str | None) -> str:
    """Return what a name tells its limit by."""
    if site is not None:
        return "site" if lane is None else "neither"
    return "all" if lane is None else "lane"
