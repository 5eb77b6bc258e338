"""Stock of one item: rows, tiers of equal cost and currency, and what of it is kept."""

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from service.network.columns import CodeArray, IntArray, Item, Network, Texts
from service.network.days import days_of
from service.network.money import factors
from service.network.units import item_units
from service.planning.model.arcs import SAFE, largest
from service.planning.model.limits import NumbersTooLargeError
from service.planning.model.scaling import Rationals


@dataclass(frozen=True, slots=True, kw_only=True)
class Stock:
    """Supply rows of one item and the tiers they form; the table's order throughout.

    ``rows`` are positions in the network's supply, ``row_tier`` their tier, ``row_steps`` what
    each adds to its site in whole steps. Tiers: ``site``, ``number`` (1-based at its site),
    ``steps``, ``money`` per step and ``from_day``, the first day on which it can be drawn (0: any).
    Kept rows: ``kept_site``, ``kept_steps``, ``kept_priority``.
    """

    rows: IntArray
    row_tier: IntArray
    row_steps: IntArray
    site: CodeArray
    number: CodeArray
    steps: IntArray
    money: Rationals
    from_day: IntArray
    kept_site: CodeArray
    kept_steps: IntArray
    kept_priority: CodeArray


def factors_of(item: Item, units: Texts, codes: CodeArray) -> tuple[Fraction, ...]:
    """Return the item units in one of each unit of a table; 1 for units that only others use."""
    used = set(np.flatnonzero(np.bincount(codes)).tolist())
    return tuple(
        _known(item, unit) if code in used else Fraction(1)
        for code, unit in enumerate(units.values)
    )


def stock_of(network: Network, item: int) -> Stock:
    """Return the stock of ``item``."""
    supply, thing = network.supply, network.items[item]
    rows = np.flatnonzero(supply.item == item)
    site, codes = supply.site[rows], supply.unit.codes[rows]
    factors = factors_of(thing, supply.unit, codes)
    money = _money(network, rows, codes, [thing.step / factor for factor in factors])
    quantity = Rationals(
        values=supply.quantity.values[rows],
        codes=codes,
        multipliers=tuple(
            factor / (thing.step * 10**supply.quantity.exponent) for factor in factors
        ),
    )
    new_site = _changes(site)
    from_day = days_of(supply.available_from, absent=0)[rows]
    new_tier = new_site | _changes(money.on(money.grid() or Fraction(1))) | _changes(from_day)
    new_tier |= _changes(supply.currency.codes[rows])
    row_tier = np.cumsum(new_tier) - 1
    first = np.flatnonzero(new_tier)
    row_steps = _whole_steps(quantity, new_site)
    steps = np.zeros(first.shape[0], np.int64)
    np.add.at(steps, row_tier, row_steps)
    # A tier's number counts all tiers of its site.
    first_of_site = np.maximum.accumulate(np.where(new_site[first], np.arange(first.shape[0]), 0))
    kept = np.flatnonzero(supply.keep_priority[rows] > 0)
    kept_quantity = Rationals(
        values=supply.keep_quantity.values[rows][kept],
        codes=codes[kept],
        multipliers=tuple(
            factor / (thing.step * 10**supply.keep_quantity.exponent) for factor in factors
        ),
    )
    kept_steps = kept_quantity.rounded(up=False, what="keep quantity of a supply row")
    # What is less than a step cannot be kept, and so is not wanted.
    whole = np.flatnonzero(kept_steps > 0)
    kept = kept[whole]
    return Stock(
        rows=rows,
        row_tier=row_tier,
        row_steps=row_steps,
        site=site[first],
        number=(np.arange(first.shape[0]) - first_of_site + 1).astype(np.int32),
        steps=steps,
        money=money.at(first),
        from_day=from_day[first],
        kept_site=site[kept],
        kept_steps=kept_steps[whole],
        kept_priority=supply.keep_priority[rows][kept],
    )


def _money(
    network: Network, rows: IntArray, unit: CodeArray, units_in_step: Sequence[Fraction]
) -> Rationals:
    """Return the money of a step of each supply row, in the currency of the plan."""
    supply = network.supply
    below = 10**supply.unit_cost.exponent
    per_unit = [units / below for units in units_in_step]
    if not supply.currency.values:
        return Rationals(
            values=supply.unit_cost.values[rows], codes=unit, multipliers=tuple(per_unit)
        )
    worth = factors(network.head)
    currencies = (None, *supply.currency.values)
    return Rationals(
        values=supply.unit_cost.values[rows],
        codes=unit + np.int32(len(per_unit)) * (supply.currency.codes[rows] + np.int32(1)),
        multipliers=tuple(money * worth[currency] for currency in currencies for money in per_unit),
    )


def _whole_steps(
    quantity: Rationals, new_site: np.ndarray[tuple[int], np.dtype[np.bool_]]
) -> IntArray:
    """Return what each row adds to the whole steps of its site: differences of rounded sums."""
    if new_site.shape[0] == 0:
        return np.zeros(0, np.int64)
    grid = quantity.grid() or Fraction(1)
    parts = quantity.on(grid)
    if parts.dtype == object or largest(parts) * parts.shape[0] * grid.numerator >= SAFE:
        parts = parts.astype(object)
    sums = np.cumsum(parts)
    starts = np.flatnonzero(new_site)
    before = (sums[starts] - parts[starts])[np.cumsum(new_site) - 1]
    whole = (sums - before) * grid.numerator // grid.denominator
    if largest(whole) >= SAFE:
        raise NumbersTooLargeError("The supply of an item at a site is 2^62 steps or more.")
    steps: IntArray = whole.astype(np.int64)
    former = np.concatenate(([0], steps[:-1]))
    return steps - np.where(new_site, 0, former)


def _changes(
    column: np.ndarray[tuple[int], np.dtype[np.generic]],
) -> np.ndarray[tuple[int], np.dtype[np.bool_]]:
    """Return where a value differs from the one before, the first row included."""
    changed = np.ones(column.shape[0], np.bool_)
    changed[1:] = column[1:] != column[:-1]
    return changed


def _known(item: Item, unit: str) -> Fraction:
    """Return the item units in one ``unit``; the intake has seen that there is an answer."""
    factor = item_units(item, unit)
    if factor is None:
        raise ValueError(f"item {item.id} says nothing of {unit}")
    return factor
