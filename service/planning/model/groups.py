"""Order lines of one item, grouped where the solver need not tell them apart."""

import json
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from service.network.columns import BoolArray, CodeArray, IntArray, Network
from service.network.days import days_of
from service.network.options import Options
from service.planning.model.scaling import Rationals
from service.planning.model.stock import factors_of

DEFAULT_PRIORITY = 5
IN_MONEY = 0
# After the last day of any calendar.
NEVER = 2**40


@dataclass(frozen=True, slots=True, kw_only=True)
class Groups:
    """Demand of one item. Groups are sorted by (site, label).

    ``rows`` are positions in the network's demand (all order lines of the item, by reference),
    ``row_steps`` what each wants in whole steps, ``row_group`` its group (-1: it wants nothing),
    ``row_priority`` its priority (``IN_MONEY``: it competes in money), ``row_money`` its money a
    step short, ``row_exact`` what it wants in steps before rounding. Groups: ``site``,
    ``steps``, ``priority``, ``money`` for a step short (0 where a priority decides), ``label`` (the
    row of the smallest reference) and ``origins`` (site positions, or None where any may serve).
    ``earliest``, ``due`` and ``latest`` are days (0 and ``NEVER`` where there is none);
    ``late_money`` is money for a step and a day after ``due`` where ``late_paid``.
    """

    rows: IntArray
    row_steps: IntArray
    row_group: IntArray
    row_priority: CodeArray
    row_money: Rationals
    row_exact: Rationals
    site: CodeArray
    steps: IntArray
    priority: CodeArray
    money: Rationals
    label: IntArray
    origins: tuple[frozenset[int] | None, ...]
    earliest: IntArray
    due: IntArray
    latest: IntArray
    late_money: Rationals
    late_paid: BoolArray

    def late_weight(self, group: IntArray | CodeArray) -> IntArray:
        """Return what a day late weighs a step of each group, 0 where it costs money instead.

        Who competes in money weighs as little as the last priority.
        """
        priority = self.priority[group]
        weight = np.where(priority == IN_MONEY, 1, 10 - priority)
        return np.where(self.late_paid[group], 0, weight).astype(np.int64)


def groups_of(network: Network, item: int, options: Options) -> Groups:
    """Return the order lines of ``item`` and their groups."""
    demand, thing = network.demand, network.items[item]
    rows = np.flatnonzero(demand.item == item)
    codes = demand.unit.codes[rows]
    factors = factors_of(thing, demand.unit, codes)
    exact = Rationals(
        values=demand.quantity.values[rows],
        codes=codes,
        multipliers=tuple(
            factor / (thing.step * 10**demand.quantity.exponent) for factor in factors
        ),
    )
    row_steps = exact.rounded(up=options.demand_rounding == "up", what="quantity of an order line")
    priority, money = _claims(network, rows, codes, factors, step=thing.step, options=options)
    wanting = np.flatnonzero(row_steps > 0)
    _, money_code = np.unique(money.on(money.grid() or Fraction(1)), return_inverse=True)
    late = Rationals(
        values=demand.late_cost_per_day.values[rows],
        codes=codes,
        multipliers=tuple(
            thing.step / (factor * 10**demand.late_cost_per_day.exponent) for factor in factors
        ),
    )
    dates = (
        days_of(demand.earliest, absent=0)[rows],
        days_of(demand.due, absent=NEVER)[rows],
        days_of(demand.latest, absent=NEVER)[rows],
    )
    paid = demand.late_cost_per_day.present[rows]
    named = demand.earliest.values or demand.due.values or demand.latest.values
    lateness = (
        *(day[wanting] for day in dates),
        paid[wanting],
        late.on(late.grid() or Fraction(1))[wanting],
    )
    keys = (
        *(lateness if named else ()),
        demand.origins.codes[rows][wanting],
        money_code[wanting],
        priority[wanting],
        demand.site[rows][wanting],
    )
    # Stable: within a group the rows stay in the order of their references.
    order = np.lexsort(keys)
    new = np.ones(order.shape[0], np.bool_)
    new[1:] = np.logical_or.reduce([key[order][1:] != key[order][:-1] for key in keys])
    first = wanting[order[np.flatnonzero(new)]]
    by_label = np.lexsort((first, demand.site[rows][first]))
    number = np.empty(first.shape[0], np.int64)
    number[by_label] = np.arange(first.shape[0])
    row_group = np.full(rows.shape[0], -1, np.int64)
    row_group[wanting[order]] = number[np.cumsum(new) - 1]
    first = first[by_label]
    steps = np.zeros(first.shape[0], np.int64)
    np.add.at(steps, row_group[wanting], row_steps[wanting])
    return Groups(
        rows=rows,
        row_steps=row_steps,
        row_group=row_group,
        row_priority=priority,
        row_money=money,
        row_exact=exact,
        site=demand.site[rows][first],
        steps=steps,
        priority=priority[first],
        money=money.at(first),
        label=rows[first],
        origins=_origins(network, rows[first]),
        earliest=dates[0][first],
        due=dates[1][first],
        latest=dates[2][first],
        late_money=late.at(first),
        late_paid=paid[first],
    )


def _claims(  # noqa: PLR0913 - the parts of one table
    network: Network,
    rows: IntArray,
    codes: CodeArray,
    factors: tuple[Fraction, ...],
    *,
    step: Fraction,
    options: Options,
) -> tuple[CodeArray, Rationals]:
    """Return each row's priority (``IN_MONEY`` where it has none) and its money a step short."""
    demand = network.demand
    given = demand.shortage_cost.present[rows]
    worth = demand.worth_at_most.present[rows]
    named = demand.priority[rows]
    none_named = ~given & ~worth & (named == 0)
    by_option = none_named & (options.worth_at_most is not None)
    priority = np.where(none_named & ~by_option, DEFAULT_PRIORITY, named).astype(np.int32)
    amount = options.worth_at_most or Fraction(0)
    units = len(factors)
    values = np.where(given, demand.shortage_cost.values[rows], demand.worth_at_most.values[rows])
    values = np.where(by_option, amount.numerator, np.where(given | worth, values, 0))
    kind = np.where(by_option, 2, np.where(given, 0, 1))
    per_step = [step / factor for factor in factors]
    return priority, Rationals(
        values=values,
        codes=(codes + units * kind).astype(np.int32),
        multipliers=(
            *(factor / 10**demand.shortage_cost.exponent for factor in per_step),
            *(factor / 10**demand.worth_at_most.exponent for factor in per_step),
            *(step / amount.denominator for _ in factors),
        ),
    )


def _origins(network: Network, rows: IntArray) -> tuple[frozenset[int] | None, ...]:
    """Return, for each order line, the positions of the sites it names as origins."""
    origins = network.demand.origins
    codes = origins.codes[rows]
    if not origins.values or bool((codes < 0).all()):
        return tuple(None for _ in range(rows.shape[0]))
    position = {site.id: place for place, site in enumerate(network.sites)}
    named = [frozenset(position[site] for site in json.loads(text)) for text in origins.values]
    return tuple(named[code] if code >= 0 else None for code in codes.tolist())
