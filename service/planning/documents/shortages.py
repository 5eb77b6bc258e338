"""The table of what is short, line by line, with its reason."""

from collections.abc import Mapping

import numpy as np

from service.network.columns import Network
from service.network.days import cut_off_day, day_text
from service.planning.documents.amounts import text
from service.planning.documents.outranking import Outranking
from service.planning.documents.reasons import Reason, Reasons
from service.planning.model.arcs import Kind
from service.planning.model.groups import IN_MONEY
from service.planning.solve import ItemFlow

Row = dict[str, object]


def shortage_rows(
    network: Network, solved: ItemFlow, *, served: Mapping[int, int]
) -> tuple[dict[int, Row], list[tuple[tuple[int, int], Row]]]:
    """Return the rows of short order lines, by demand row, and those of kept stock.

    ``served`` has the steps served by demand row. Rows of kept stock come with the (site, item)
    that they are sorted by. A group is short as a whole: its lines share one reason.
    """
    own = solved.own
    shorts = own.of_kind(Kind.SHORT, Kind.KEEP_SHORT)
    shorts = shorts[solved.flow[shorts] > 0]
    if shorts.shape[0] == 0:  # Reasons look at every arc before they are asked for the first one.
        return {}, []
    item = network.items[own.item]
    reasons = Reasons(solved)
    outranking = Outranking(network, solved, reasons.bottlenecks, served=served)

    def because(arc: int, reason: Reason, itself: int | None) -> Row:
        row: Row = {"reason": reason.value, "next_chance": _next_chance(network, solved, reason)}
        if reason == Reason.OUTRANKED:
            largest = outranking.ahead_of(arc, itself=itself)
            if largest is not None:
                row["outranked_by"] = largest
        return row

    of_group: dict[int, tuple[int, Reason]] = {}
    kept: list[tuple[tuple[int, int], Row]] = []
    for arc in shorts.tolist():
        subject, reason = int(own.subject[arc]), reasons.reason(arc)
        if own.kind[arc] == Kind.SHORT:
            of_group[subject] = arc, reason
            continue
        site = int(own.stock.kept_site[subject])
        row: Row = {
            "reference": None,
            "site": network.sites[site].id,
            "item": item.id,
            "priority": int(own.stock.kept_priority[subject]),
            "quantity": text(int(solved.flow[arc]) * item.step),
            **because(arc, reason, None),
            "kept": True,
        }
        kept.append(((site, own.item), row))
    lines: dict[int, Row] = {}
    groups = own.groups
    for at in np.flatnonzero(np.isin(groups.row_group, list(of_group))).tolist():
        demand_row = int(groups.rows[at])
        missing = int(groups.row_steps[at]) - served[demand_row]
        if not missing:
            continue
        arc, reason = of_group[int(groups.row_group[at])]
        priority = int(groups.row_priority[at])
        lines[demand_row] = {
            "reference": network.demand.reference[demand_row].decode(),
            "site": network.sites[network.demand.site[demand_row]].id,
            "item": item.id,
            "priority": None if priority == IN_MONEY else priority,
            "quantity": text(missing * item.step),
            **because(arc, reason, at if served[demand_row] else None),
        }
    return lines, kept


def _next_chance(network: Network, solved: ItemFlow, reason: Reason) -> str | None:
    """Return when more stock of the item comes, where that is what is missing."""
    if reason not in {Reason.NO_STOCK, Reason.TOO_LATE, Reason.OUTRANKED}:
        return None
    stock, today = solved.own.stock, cut_off_day(network.head)
    later = stock.from_day[(stock.from_day > today) & (stock.steps > 0)]
    return day_text(int(later.min())) if later.shape[0] else None
