"""The sound rows of the three tables put together as a network, in the order of the normal form.

Checks that need more than one table work on it; the row numbers lead back to the rows as sent.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from service.network.columns import BoolArray, IntArray, LaneTable, Network
from service.network.lane_names import own_names_dropped
from service.network.money import factors
from service.network.normal_form import lane_order, rule_key, supply_order
from service.network.rule_reading import SentRule
from service.network.table_rows import rows_of
from service.network.tables import ReadTables
from service.network.things import Things


@dataclass(frozen=True, slots=True, kw_only=True)
class Assembly:
    """A network of sound rows, and for each row of its tables the row as sent."""

    network: Network
    supply_rows: IntArray
    demand_rows: IntArray
    lane_rows: IntArray
    sent: ReadTables
    rules: Sequence[SentRule]


def assemble(
    head: Mapping[str, object],
    things: Things,
    sent: ReadTables,
    rules: Sequence[SentRule],
) -> Assembly:
    """Put the sound rows together; a lane id that says no more than its name is dropped."""
    supply, demand, lanes = sent.supply, sent.demand, sent.lanes
    stock_rows = _sound(supply.faults.bad)
    stock = rows_of(supply.table, stock_rows)
    order = supply_order(stock, things.items, factors(head))
    stock, stock_rows = rows_of(stock, order), stock_rows[order]

    lines_rows = _sound(demand.faults.bad)
    lines_rows = lines_rows[np.argsort(demand.table.reference[lines_rows], kind="stable")]
    lines = rows_of(demand.table, lines_rows)

    lane_rows = _sound(lanes.faults.bad)
    ways, order = _sorted(rows_of(lanes.table, lane_rows))
    lane_rows = lane_rows[order]
    network = Network(
        head={
            **head,
            "rules": sorted((dict(rule.document) for rule in rules), key=rule_key),
        },
        items=things.items,
        sites=things.sites,
        supply=stock,
        demand=lines,
        lanes=ways,
    )
    ids = own_names_dropped(network)
    if ids is not ways.ids:
        ways, order = _sorted(replace(ways, ids=ids))
        lane_rows = lane_rows[order]
        network = replace(network, lanes=ways)
    return Assembly(
        network=network,
        supply_rows=stock_rows,
        demand_rows=lines_rows,
        lane_rows=lane_rows,
        sent=sent,
        rules=rules,
    )


def _sound(bad: BoolArray) -> IntArray:
    """Return the rows that are not bad."""
    return np.flatnonzero(~bad)


def _sorted(lanes: LaneTable) -> tuple[LaneTable, IntArray]:
    """Return lanes in the order of the normal form, and that order."""
    order = lane_order(lanes)
    return rows_of(lanes, order), order
