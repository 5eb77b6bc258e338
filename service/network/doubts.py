"""Doubts about a sound network: it is planned all the same, and the plan carries them."""

from collections.abc import Callable
from dataclasses import replace

import numpy as np

from service.network.assembly import Assembly
from service.network.columns import BoolArray, CodeArray, IntArray, Network
from service.network.faults import FaultList
from service.network.reach import LaneUse
from service.network.table_rows import by_item_and_text, off_grid, rows_of
from service.network.units import item_units

# A carrier's rate that much above its median is more likely a slip of the decimal point.
RATE_OUT_OF_LINE = 100
LANES_FOR_A_MEDIAN = 3
# So many carriers are looked at one by one; more of them, all at once.
KEYS_APART_MAX = 1000


def doubt(assembly: Assembly, use: LaneUse, faults: FaultList) -> None:
    """Report every doubt that needs no dates."""
    network = assembly.network
    supply, demand, lanes = (
        assembly.sent.supply.faults,
        assembly.sent.demand.faults,
        assembly.sent.lanes.faults,
    )
    checks = (
        (
            "demand_zero",
            "The order line wants nothing.",
            demand,
            "quantity",
            assembly.demand_rows[np.flatnonzero(network.demand.quantity.values == 0)],
        ),
        (
            "demand_not_reached",
            "No lane that the item can use ends here, and there is no stock of it here.",
            demand,
            "site",
            assembly.demand_rows[_demand_not_reached(network, use)],
        ),
        (
            "supply_not_sent",
            "No lane that the item can use begins here, and nobody here wants it.",
            supply,
            "site",
            assembly.supply_rows[_supply_not_sent(network, use)],
        ),
        (
            "supply_off_step",
            "No whole number of steps: stock of one unit cost is added up and rounded down to one.",
            supply,
            "quantity",
            assembly.supply_rows[_off_step(network, "quantity")],
        ),
        (
            "keep_off_step",
            "No whole number of steps; what stays in stock is rounded down to one.",
            supply,
            "keep",
            assembly.supply_rows[_off_step(network, "keep_quantity")],
        ),
        (
            "rate_out_of_line",
            f"The rate is {RATE_OUT_OF_LINE} times the median of its carrier, or more.",
            lanes,
            "unit_cost",
            assembly.lane_rows[_rates_out_of_line(network)],
        ),
    )
    for code, detail, sheet, name, rows in checks:
        shown = np.sort(rows)[:3].tolist()
        examples = [(sheet.place(name, row), sheet.value(name, row)) for row in shown]
        faults.caution(code, detail, examples, len(rows))


def _demand_not_reached(network: Network, use: LaneUse) -> IntArray:
    """Return order lines that want something where nothing can come from."""
    demand = network.demand
    wanted = demand.quantity.values > 0

    def served(item: int) -> BoolArray:
        return use.received(item) | use.stock(item)

    return _where_not(demand.item, demand.site, np.flatnonzero(wanted), served)


def _supply_not_sent(network: Network, use: LaneUse) -> IntArray:
    """Return supply rows with stock that cannot leave and is not wanted where it is."""
    supply = network.supply
    stocked = supply.quantity.values > 0

    def used(item: int) -> BoolArray:
        return use.sent(item) | use.wanted(item)

    return _where_not(supply.item, supply.site, np.flatnonzero(stocked), used)


def _where_not(
    item: CodeArray,
    site: CodeArray,
    rows: IntArray,
    holds: Callable[[int], BoolArray],
) -> IntArray:
    """Return those of ``rows`` at whose site ``holds`` is False for their item."""
    order = rows[np.argsort(item[rows], kind="stable")]
    groups = np.split(order, np.flatnonzero(np.diff(item[order])) + 1) if len(order) else []
    found = [members[~holds(int(item[members[0]]))[site[members]]] for members in groups]
    return np.concatenate([np.zeros(0, dtype=np.int64), *found])


def _off_step(network: Network, name: str) -> IntArray:
    """Return supply rows whose quantity (or kept quantity) is no whole number of steps."""
    supply = network.supply
    column = supply.quantity if name == "quantity" else supply.keep_quantity
    found: list[IntArray] = [np.zeros(0, dtype=np.int64)]
    rows = np.flatnonzero(column.present)
    for position, unit, members in by_item_and_text(supply.item, supply.unit, rows):
        item = network.items[position]
        factor = item_units(item, unit)
        if factor is not None:
            found.append(off_grid(column, members, item.step / factor))
    return np.concatenate(found)


def _rates_out_of_line(network: Network) -> IntArray:
    """Return lanes whose rate is far above the median of their carrier, measure and currency.

    Lanes without a carrier are compared with one another. Of an even number of rates the lower
    middle one counts, so that the comparison stays exact.
    """
    lanes = network.lanes
    priced = np.flatnonzero(lanes.unit_cost.present)
    if len(priced) < len(lanes):
        # Lanes with a tariff have no rate of their own.
        return priced[_rates_out_of_line(replace(network, lanes=rows_of(lanes, priced)))]
    rates = lanes.unit_cost.values
    keys = (lanes.carrier.codes.astype(np.int64) + 1) * (len(lanes.measure.values) + 1)
    keys = keys + lanes.measure.codes
    if lanes.currency.values:
        keys = keys * (len(lanes.currency.values) + 1) + lanes.currency.codes + 1
    if len(keys) == 0 or bool((keys == keys[0]).all()):
        return _far_above(rates)
    if int(keys.max()) < KEYS_APART_MAX:
        # Short keys are sorted by their digits, in one pass over the rows for each.
        order = np.argsort(keys.astype(np.int16), kind="stable")
        groups = np.split(order, np.flatnonzero(np.diff(keys[order])) + 1)
        return np.concatenate([rows[_far_above(rates[rows])] for rows in groups])
    order = np.lexsort((rates, keys))
    starts = np.flatnonzero(np.concatenate(([True], np.diff(keys[order]) != 0)))
    counts = np.diff(np.append(starts, len(order)))
    medians = rates[order[starts + (counts - 1) // 2]]
    median = np.repeat(medians, counts)
    many = np.repeat(counts >= LANES_FOR_A_MEDIAN, counts)
    # Dividing instead of multiplying keeps within 64 bits: a >= 100 b is a // 100 >= b.
    far = many & (median > 0) & (rates[order] // RATE_OUT_OF_LINE >= median)
    found: IntArray = order[far]
    return found


def _far_above(rates: IntArray) -> IntArray:
    """Return where rates of one carrier and measure are far above their median."""
    if len(rates) < LANES_FOR_A_MEDIAN:
        return np.zeros(0, dtype=np.int64)
    least, most = int(rates.min()), int(rates.max())
    if least > 0 and most < least * RATE_OUT_OF_LINE:
        # The median lies between the two.
        return np.zeros(0, dtype=np.int64)
    middle = (len(rates) - 1) // 2
    limit = int(np.partition(rates, middle)[middle]) * RATE_OUT_OF_LINE
    return np.flatnonzero(rates >= limit) if 0 < limit <= most else np.zeros(0, dtype=np.int64)
