"""The stock of one item: tiers of one cost and currency, whole steps, what each row gives."""

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from service.network.columns import Network
from service.network.units import item_units
from service.proof.calendar import day_of
from service.proof.money import in_plan_money
from service.proof.rulings import UnusableNetworkError


@dataclass(frozen=True, slots=True, kw_only=True)
class StockRow:
    """What one supply row gives: whole steps of a tier (from 1), and its lot."""

    row: int
    tier: int
    steps: int
    lot: str | None


@dataclass(frozen=True, slots=True, kw_only=True)
class Stock:
    """The stock of an item at a site.

    ``tier_cost`` is money per item unit in the currency of the plan, ``tier_stated`` the currency
    (None: that one) and the money in it, ``tier_steps`` what there is, ``tier_from`` the first day
    on which it can be drawn (0: any); later tiers come later, and of these dearer ones.
    ``keep_steps`` is what should stay (0: no node for it), of ``keep_priority``.
    """

    tier_cost: tuple[Fraction, ...]
    tier_stated: tuple[tuple[str | None, Fraction], ...]
    tier_steps: tuple[int, ...]
    tier_from: tuple[int, ...]
    rows: tuple[StockRow, ...]
    keep_steps: int
    keep_priority: int


def stock_of(network: Network, item: int) -> Mapping[int, Stock]:
    """Return the stock of ``item`` by site (a position), sites ascending."""
    supply = network.supply
    at_site: dict[int, list[int]] = {}
    for row in np.flatnonzero(supply.item == item).tolist():
        at_site.setdefault(int(supply.site[row]), []).append(row)
    return {site: _stock(network, item, rows) for site, rows in at_site.items()}


def _stock(network: Network, item: int, rows: list[int]) -> Stock:
    """Return the stock that ``rows`` of one site and item, in the table's order, add up to.

    Cumulative sums are rounded down to the step and then differenced, so that what no row holds
    alone is not lost where rows add up to a step.
    """
    supply, step = network.supply, network.items[item].step
    costs: list[Fraction] = []
    stated: list[tuple[str | None, Fraction]] = []
    steps: list[int] = []
    since: list[int] = []
    parts: list[StockRow] = []
    held = Fraction(0)
    keep_steps = keep_priority = 0
    for row in rows:
        units = _row_units(network, item, row)
        money = (supply.unit_cost.fraction(row) or Fraction(0)) / units
        currency = supply.currency.text(row)
        cost = money * in_plan_money(network.head, currency)
        named = supply.available_from.text(row)
        first = 0 if named is None else day_of(named)
        tier = (cost, currency, first)
        if not costs or tier != (costs[-1], stated[-1][0], since[-1]):
            costs.append(cost)
            stated.append((currency, money))
            since.append(first)
            steps.append(0)
        before = held // step
        held += (supply.quantity.fraction(row) or Fraction(0)) * units
        gained = held // step - before
        steps[-1] += gained
        parts.append(StockRow(row=row, tier=len(costs), steps=gained, lot=supply.lot.text(row)))
        kept = supply.keep_quantity.fraction(row)
        if kept is not None and kept * units >= step:
            keep_steps = kept * units // step
            keep_priority = int(supply.keep_priority[row])
    return Stock(
        tier_cost=tuple(costs),
        tier_stated=tuple(stated),
        tier_steps=tuple(steps),
        tier_from=tuple(since),
        rows=tuple(parts),
        keep_steps=keep_steps,
        keep_priority=keep_priority,
    )


def _row_units(network: Network, item: int, row: int) -> Fraction:
    """Return the item units in one unit of a supply row."""
    unit = network.supply.unit.text(row)
    units = None if unit is None else item_units(network.items[item], unit)
    if units is None:
        raise UnusableNetworkError(f"supply row {row} has an unknown unit")
    return units
