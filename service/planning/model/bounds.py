"""What a lane must and may carry of one item, and what a step on it costs."""

from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from service.network.columns import BoolArray, Decimals, IntArray, Item, Network
from service.network.days import Movements, gone_lanes
from service.network.lane_rates import lane_rates
from service.network.rules import FixedQuantity
from service.network.units import per_unit
from service.planning.model.arcs import UNLIMITED
from service.planning.model.rule_book import RuleBook
from service.planning.model.scaling import Rationals


@dataclass(frozen=True, slots=True, kw_only=True)
class LaneBounds:
    """Lanes that one item can use, as columns of shape (lanes of the item,).

    ``rows`` are positions in the network's lanes, ascending. ``minimum`` and ``capacity``
    (``UNLIMITED``: no limit) are in steps with all rules applied; ``money`` is money per step, of
    which ``charges`` are a part (None: there are none). ``stated_minimum`` and ``stated_capacity``
    are those without any rule. ``at`` picks the lanes from a column of the network: ``rows``, or a
    slice where they are all. Columns that say the same of every lane are views of one value, which
    nobody can write to. In a network with dates a lane stands here once for each day of departure:
    ``departs`` and ``arrives`` are its days.

    A lane with a tariff has an entry for each run of steps that cost the same (made by
    ``tariff_segments.py``): ``first`` is the position of the first of them and ``width`` how many
    steps fit each (``UNLIMITED``: any number); both are None where no lane is split.
    """

    rows: IntArray
    at: IntArray | slice
    minimum: IntArray
    capacity: IntArray
    money: Rationals
    charges: Rationals | None
    closed: BoolArray
    fixed: BoolArray
    stated_minimum: IntArray
    stated_capacity: IntArray
    departs: IntArray | None = None
    arrives: IntArray | None = None
    first: IntArray | None = None
    width: IntArray | None = None


def lane_bounds(
    network: Network,
    item: int,
    rows: IntArray,
    book: RuleBook,
    *,
    movements: Movements | None = None,
) -> LaneBounds:
    """Return bounds and costs of the lanes at ``rows`` for ``item``, of all their ``movements``."""
    lanes, thing = network.lanes, network.items[item]
    rows, departs, arrives = _moves(rows, movements)
    count = rows.shape[0]
    every = np.array_equal(rows, np.arange(len(lanes)))
    at: IntArray | slice = slice(None) if every else rows
    codes = lanes.measure.codes[at]
    # Every measure of the table is on one of its lanes.
    used = range(len(lanes.measure.values)) if every else np.flatnonzero(np.bincount(codes))
    # How much of each measure one step is; a measure that only other items know is not used here.
    step_is = [Fraction(1)] * len(lanes.measure.values)
    for code in used:
        step_is[code] = _measured(thing, lanes.measure.values[code]) * thing.step
    steps_in = tuple(1 / amount if amount else Fraction(0) for amount in step_is)

    def steps(column: Decimals, what: str) -> IntArray:
        scale = Fraction(1, 10**column.exponent)
        return Rationals(
            values=column.values[at],
            codes=codes,
            multipliers=tuple(factor * scale for factor in steps_in),
        ).rounded(up=False, what=what)

    minimum = stated_minimum = _of_all(0, count)
    if lanes.must_ship.present.any():
        stated_minimum = steps(lanes.must_ship, "must_ship of a lane")
        stated_minimum[_together(network, at)] = 0
        minimum = stated_minimum
    capacity = stated_capacity = _of_all(UNLIMITED, count)
    if lanes.capacity.present.any():
        # What weighs nothing fits any number of times.
        weightless = np.array([amount == 0 for amount in step_is], np.bool_)[codes]
        capacity = stated_capacity = np.where(
            lanes.capacity.present[at] & ~weightless,
            steps(lanes.capacity, "capacity of a lane"),
            UNLIMITED,
        )
    quantities = book.fixed_quantities(item)
    closings = [entry.lanes for entry in book.closures(item)] + _gone(network, movements)
    fixed = closed = np.broadcast_to(np.False_, (count,))
    if quantities or closings:
        minimum, capacity = minimum.copy(), capacity.copy()
        fixed, closed = fixed.copy(), closed.copy()
    for entry in quantities:
        picked = entry.lanes[at]
        fixed |= picked
        if isinstance(entry.rule, FixedQuantity) and picked.any():
            quantity = Rationals(
                values=np.full(count, entry.rule.quantity.numerator, object)[picked],
                codes=codes[picked],
                multipliers=tuple(factor / entry.rule.quantity.denominator for factor in steps_in),
            ).rounded(up=False, what="quantity of a fixed_quantity rule")
            minimum[picked] = quantity
            capacity[picked] = quantity
    for shut in closings:
        closed |= shut[at]
    if closings:
        minimum[closed] = 0
        capacity[closed] = 0
    money, charges = _money(network, item, at, rows.shape[0])
    return LaneBounds(
        rows=rows,
        at=at,
        minimum=minimum,
        capacity=capacity,
        money=money,
        charges=charges,
        closed=closed,
        fixed=fixed & ~closed if quantities else fixed,
        stated_minimum=stated_minimum,
        stated_capacity=stated_capacity,
        departs=departs,
        arrives=arrives,
    )


def _moves(
    rows: IntArray, movements: Movements | None
) -> tuple[IntArray, IntArray | None, IntArray | None]:
    """Return the lanes at ``rows``, each once for every day on which it departs, and its days."""
    if movements is None:
        return rows, None, None
    moves = movements.of_lanes(rows)
    return movements.row[moves], movements.departs[moves], movements.arrives[moves]


def _gone(network: Network, movements: Movements | None) -> list[BoolArray]:
    """Return which lanes closed before the plan is made; nothing where none has a departure."""
    if movements is None or not network.lanes.departs.values:
        return []
    return [gone_lanes(network)]


def _together(network: Network, at: IntArray | slice) -> BoolArray:
    """Return on which lanes the least is one of all items together, and of none by itself."""
    lanes = network.lanes
    per = lanes.per.codes[at]
    if "together" not in lanes.per.values:
        return np.broadcast_to(np.False_, per.shape)
    together: BoolArray = per == lanes.per.values.index("together")
    return together & (lanes.item[at] < 0)


def _of_all(value: int, count: int) -> IntArray:
    """Return a column that has ``value`` in all its ``count`` rows."""
    column: IntArray = np.broadcast_to(np.int64(value), (count,))
    return column


def _money(
    network: Network, item: int, at: IntArray | slice, count: int
) -> tuple[Rationals, Rationals | None]:
    """Return the money of a step on each lane, and the charges in it, None if there are none."""
    step = network.items[item].step
    found = lane_rates(network, item, at)
    rates = tuple(Fraction(0) if rate is None else rate * step for rate in found.rates)
    money = Rationals(
        values=network.lanes.unit_cost.values[at], codes=found.codes, multipliers=rates
    )
    if not found.with_charges:
        return money, None
    due = [Fraction(0) if charge is None else charge * step for charge in found.charges]
    charges = Rationals(values=_of_all(1, count), codes=found.codes, multipliers=tuple(due))
    return money.plus(charges), charges


def _measured(item: Item, measure: str) -> Fraction:
    """Return how much of ``measure`` one unit of ``item`` is, which the intake has seen known."""
    amount = per_unit(item, measure)
    if amount is None:
        raise ValueError(f"item {item.id} says nothing of {measure}")
    return amount
