"""What a lane must and may carry of one item, and what a step on it costs."""

from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from service.network.columns import BoolArray, Decimals, IntArray, Item, Network
from service.network.rules import FixedQuantity
from service.network.units import per_unit
from service.planning.arcs import UNLIMITED
from service.planning.rule_book import RuleBook
from service.planning.scaling import Rationals


@dataclass(frozen=True, slots=True, kw_only=True)
class LaneBounds:
    """Lanes that one item can use, as columns of shape (lanes of the item,).

    ``rows`` are positions in the network's lanes, ascending. ``minimum`` and ``capacity``
    (``UNLIMITED``: no limit) are in steps with all rules applied; ``money`` is money per step.
    ``stated_minimum`` and ``stated_capacity`` are those without any rule.
    """

    rows: IntArray
    minimum: IntArray
    capacity: IntArray
    money: Rationals
    closed: BoolArray
    fixed: BoolArray
    stated_minimum: IntArray
    stated_capacity: IntArray


def lane_bounds(network: Network, item: int, rows: IntArray, book: RuleBook) -> LaneBounds:
    """Return bounds and costs of the lanes at ``rows`` for ``item``."""
    lanes, thing = network.lanes, network.items[item]
    codes = lanes.measure.codes[rows]
    used = set(np.flatnonzero(np.bincount(codes)).tolist())
    # How much of each measure one step is; a measure that only other items know is not used here.
    step_is = tuple(
        _measured(thing, measure) * thing.step if code in used else Fraction(1)
        for code, measure in enumerate(lanes.measure.values)
    )
    # What weighs nothing fits any number of times.
    weightless = np.array([amount == 0 for amount in step_is], np.bool_)[codes]
    steps_in = tuple(1 / amount if amount else Fraction(0) for amount in step_is)

    def steps(column: Decimals, what: str) -> IntArray:
        scale = Fraction(1, 10**column.exponent)
        return Rationals(
            values=column.values[rows],
            codes=codes,
            multipliers=tuple(factor * scale for factor in steps_in),
        ).rounded(up=False, what=what)

    stated_minimum = steps(lanes.must_ship, "must_ship of a lane")
    stated_capacity = np.where(
        lanes.capacity.present[rows] & ~weightless,
        steps(lanes.capacity, "capacity of a lane"),
        UNLIMITED,
    )
    minimum, capacity = stated_minimum.copy(), stated_capacity.copy()
    fixed = np.zeros(rows.shape[0], np.bool_)
    for entry in book.fixed_quantities(item):
        picked = entry.lanes[rows]
        fixed |= picked
        if isinstance(entry.rule, FixedQuantity) and picked.any():
            quantity = Rationals(
                values=np.full(rows.shape[0], entry.rule.quantity.numerator, object)[picked],
                codes=codes[picked],
                multipliers=tuple(factor / entry.rule.quantity.denominator for factor in steps_in),
            ).rounded(up=False, what="quantity of a fixed_quantity rule")
            minimum[picked] = quantity
            capacity[picked] = quantity
    closed = np.zeros(rows.shape[0], np.bool_)
    for entry in book.closures(item):
        closed |= entry.lanes[rows]
    minimum[closed] = 0
    capacity[closed] = 0
    unit_cost = Fraction(1, 10**lanes.unit_cost.exponent)
    return LaneBounds(
        rows=rows,
        minimum=minimum,
        capacity=capacity,
        money=Rationals(
            values=lanes.unit_cost.values[rows],
            codes=codes,
            multipliers=tuple(amount * unit_cost for amount in step_is),
        ),
        closed=closed,
        fixed=fixed & ~closed,
        stated_minimum=stated_minimum,
        stated_capacity=stated_capacity,
    )


def _measured(item: Item, measure: str) -> Fraction:
    """Return how much of ``measure`` one unit of ``item`` is, which the intake has seen known."""
    amount = per_unit(item, measure)
    if amount is None:
        raise ValueError(f"item {item.id} says nothing of {measure}")
    return amount
