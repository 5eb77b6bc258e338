"""What the rules in force close, fix and limit for one item."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Self

import numpy as np

from service.network.columns import BoolArray, IntArray, Item, LaneTable, Network
from service.network.rules import (
    Closure,
    FixedQuantity,
    Rule,
    Throughput,
    in_force,
    items_selected,
    lanes_selected,
    rules_of,
    sites_selected,
)
from service.network.units import per_unit
from service.proof.exact import Whole, floor_of, repeated, whole, whole_of
from service.proof.usable import of_rows


class UnusableNetworkError(ValueError):
    """The network states something that cannot be planned; the message names it."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Ruling:
    """One rule in force and what it picks: bool of shape (lanes,), (sites,) and (items,)."""

    rule: Rule
    lanes: BoolArray
    sites: BoolArray
    items: BoolArray


@dataclass(frozen=True, slots=True, kw_only=True)
class LaneLimits:
    """Least and most steps on each usable lane of an item; a most of -1 is unlimited."""

    minimum: Whole
    capacity: Whole


@dataclass(frozen=True, slots=True, kw_only=True)
class Rulings:
    """Every rule in force, in the order of the head."""

    rulings: tuple[Ruling, ...]

    @classmethod
    def of(cls, network: Network) -> Self:
        """Return what the rules in force on the day of the cut-off pick in ``network``."""
        cut_off = str(network.head["cut_off"])
        return cls(
            rulings=tuple(
                Ruling(
                    rule=rule,
                    lanes=lanes_selected(network, rule),
                    sites=sites_selected(network, rule),
                    items=items_selected(network, rule),
                )
                for rule in rules_of(network)
                if in_force(rule, cut_off)
            )
        )

    def over(self, lanes: IntArray) -> Self:
        """Return the same rules over lanes that stand for those at ``lanes``."""
        return replace(
            self,
            rulings=tuple(replace(ruling, lanes=ruling.lanes[lanes]) for ruling in self.rulings),
        )

    def closed_sites(self, item: int, sites: int) -> BoolArray:
        """Return, in shape (sites,), which sites are closed for ``item``."""
        closed = np.zeros(sites, dtype=np.bool_)
        for ruling in self.rulings:
            if isinstance(ruling.rule, Closure) and ruling.items[item]:
                closed |= ruling.sites
        return closed

    def throughputs(self, item: int) -> list[Ruling]:
        """Return the throughput limits that pick ``item``."""
        return [
            ruling
            for ruling in self.rulings
            if isinstance(ruling.rule, Throughput) and ruling.items[item]
        ]

    def lane_limits(self, network: Network, item: int, rows: IntArray) -> LaneLimits:
        """Return the limits in force on the usable lanes ``rows`` of ``item``.

        Raises ``UnusableNetworkError`` for a minimum off the step or above the capacity, and for
        fixed quantities that contradict each other.
        """
        minimum, broken = must_ship_steps(network, item, rows)
        capacity = capacity_steps(network, item, rows)
        about = [ruling for ruling in self.rulings if ruling.items[item]]
        if about:
            minimum, capacity, broken = minimum.copy(), capacity.copy(), broken.copy()
        fixed = np.zeros(len(rows) if about else 0, dtype=np.bool_)
        for ruling in about:
            rule = ruling.rule
            if not isinstance(rule, FixedQuantity):
                continue
            here = ruling.lanes[rows]
            quantity, off = fixed_steps(network, item, rows, rule.quantity)
            if (fixed & here & (minimum != quantity)).any():
                raise UnusableNetworkError(f"rule {rule.id!r} contradicts another fixed quantity")
            minimum = np.where(here, quantity, minimum)
            capacity = np.where(here, quantity, capacity)
            broken = np.where(here, off, broken)
            fixed |= here
        for ruling in about:
            if isinstance(ruling.rule, Closure):
                closed = ruling.lanes[rows]
                minimum[closed] = 0
                capacity[closed] = 0
                broken[closed] = False
        if broken.any():
            raise UnusableNetworkError("a must-ship or fixed quantity is off the step of its item")
        if minimum.any() and ((capacity >= 0) & (minimum > capacity)).any():
            raise UnusableNetworkError("a must-ship is above its capacity")
        return LaneLimits(minimum=minimum, capacity=capacity)


def measure_of(item: Item, measure: str) -> Fraction:
    """Return how much of ``measure`` one item unit is, which must be above 0."""
    per = per_unit(item, measure)
    if per is None or per <= 0:
        raise UnusableNetworkError(f"item {item.id!r} has no {measure}")
    return per


def measures_on(network: Network, item: int, rows: IntArray) -> Mapping[int, Fraction]:
    """Return, by code of a measure on the lanes ``rows``, its amount in one step of ``item``."""
    lanes, thing = network.lanes, network.items[item]
    # Every measure of the table is on one of its lanes.
    used = (
        list(range(len(lanes.measure.values)))
        if len(rows) == len(lanes)
        else np.flatnonzero(np.bincount(lanes.measure.codes[rows])).tolist()
    )
    return {code: measure_of(thing, lanes.measure.values[code]) * thing.step for code in used}


def check_limits_are_clear(lanes: LaneTable, several: BoolArray) -> None:
    """Raise unless a limit on a lane that ``several`` items can use says that it is per item."""
    limited = lanes.capacity.present | lanes.must_ship.present
    if (several & limited & (lanes.item == -1) & (lanes.per.codes < 0)).any():
        raise UnusableNetworkError("a limit on a lane of several items does not say per what")


def must_ship_steps(network: Network, item: int, rows: IntArray) -> tuple[Whole, BoolArray]:
    """Return what must go on each lane in steps, and which of it is off the step."""
    column = network.lanes.must_ship
    present = of_rows(column.present, rows)
    if "together" in network.lanes.per.values:
        # A least of all items together is none of any one.
        shared = network.lanes.per.values.index("together")
        present = present & (of_rows(network.lanes.per.codes, rows) != shared)
    if not present.any():
        return repeated(0, len(rows)), np.broadcast_to(np.False_, (len(rows),))
    broken = np.zeros(len(rows), dtype=np.bool_)

    def steps(here: IntArray, amount: Fraction) -> Whole:
        part, broken[here] = whole_of(column.values[rows[here]], 1 / (10**column.exponent * amount))
        return part

    must = _by_measure(network, item, rows, steps)
    must[~present] = 0
    broken[~present] = False
    return must, broken


def capacity_steps(network: Network, item: int, rows: IntArray) -> Whole:
    """Return the capacity of each lane in steps, rounded down; -1 where there is none."""
    column = network.lanes.capacity
    limited = of_rows(column.present, rows)
    if not limited.any():
        return repeated(-1, len(rows))
    capacity = _by_measure(
        network,
        item,
        rows,
        lambda here, amount: floor_of(
            column.values[rows[here]], 1 / (10**column.exponent * amount)
        ),
    )
    capacity[~limited] = -1
    return capacity


def fixed_steps(
    network: Network, item: int, rows: IntArray, quantity: Fraction
) -> tuple[Whole, BoolArray]:
    """Return a fixed quantity on each lane in steps, and where it is off the step."""
    broken = np.zeros(len(rows), dtype=np.bool_)

    def steps(here: IntArray, amount: Fraction) -> Whole:
        exact = quantity / amount
        broken[here] = exact.denominator != 1
        return whole([exact.numerator // exact.denominator] * len(here))

    return _by_measure(network, item, rows, steps), broken


def _by_measure(
    network: Network, item: int, rows: IntArray, steps: Callable[[IntArray, Fraction], Whole]
) -> Whole:
    """Return ``steps(places, amount of the measure in one step)`` for the lanes of each measure."""
    codes = of_rows(network.lanes.measure.codes, rows)
    result: Whole = np.zeros(len(rows), dtype=np.int64)
    for code, amount in measures_on(network, item, rows).items():
        here = np.flatnonzero(codes == code)
        part = steps(here, amount)
        if part.dtype == object:
            result = result.astype(object)
        result[here] = part
    return result
