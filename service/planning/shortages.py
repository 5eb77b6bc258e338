"""The table of what is short, line by line, with its reason."""

from collections.abc import Mapping

import numpy as np

from service.network.columns import Network
from service.planning.amounts import text
from service.planning.arcs import Kind
from service.planning.groups import IN_MONEY
from service.planning.reasons import Reason, Reasons
from service.planning.solve import ItemFlow


def shortage_rows(
    network: Network, solved: ItemFlow, *, served: Mapping[int, int]
) -> tuple[dict[int, dict[str, object]], list[tuple[tuple[int, int], dict[str, object]]]]:
    """Return the rows of short order lines, by demand row, and those of kept stock.

    ``served`` has the steps served by demand row. Rows of kept stock come with the (site, item)
    that they are sorted by. A group is short as a whole: its lines share one reason.
    """
    own = solved.own
    step = network.items[own.item].step
    reasons = Reasons(solved)
    shorts = own.of_kind(Kind.SHORT, Kind.KEEP_SHORT)
    lines: dict[int, dict[str, object]] = {}
    kept: list[tuple[tuple[int, int], dict[str, object]]] = []
    of_group: dict[int, dict[str, object]] = {}
    for arc in shorts[solved.flow[shorts] > 0].tolist():
        missing, subject = int(solved.flow[arc]), int(own.subject[arc])
        reason = reasons.reason(arc, missing)
        because: dict[str, object] = {"reason": reason.value, "next_chance": None}
        if reason == Reason.OUTRANKED:
            first = _outranked_by(network, solved, reasons, arc, served=served)
            if first is not None:
                because["outranked_by"] = first
        if own.kind[arc] == Kind.SHORT:
            of_group[subject] = because
            continue
        site = int(own.stock.kept_site[subject])
        kept.append(
            (
                (site, own.item),
                {
                    "reference": None,
                    "site": network.sites[site].id,
                    "item": network.items[own.item].id,
                    "priority": int(own.stock.kept_priority[subject]),
                    "quantity": text(missing * step),
                    **because,
                    "kept": True,
                },
            )
        )
    groups = own.groups
    for at in np.flatnonzero(np.isin(groups.row_group, list(of_group))).tolist():
        row, group = int(groups.rows[at]), int(groups.row_group[at])
        missing = int(groups.row_steps[at]) - served[row]
        if missing:
            priority = int(groups.row_priority[at])
            lines[row] = {
                "reference": network.demand.reference[row].decode(),
                "site": network.sites[network.demand.site[row]].id,
                "item": network.items[own.item].id,
                "priority": None if priority == IN_MONEY else priority,
                "quantity": text(missing * step),
                **of_group[group],
            }
    return lines, kept


def _outranked_by(
    network: Network,
    solved: ItemFlow,
    reasons: Reasons,
    short_arc: int,
    *,
    served: Mapping[int, int],
) -> dict[str, object] | None:
    """Return the largest line that went first, and how many did; None where only stock is kept."""
    own = solved.own
    nodes = reasons.went_first(short_arc)
    group_at = {int(node): group for group, node in enumerate(own.layout.demand)}
    first = {group_at[int(node)] for node in nodes if int(node) in group_at}
    lines = [
        (served[int(own.groups.rows[at])], -at)
        for at in np.flatnonzero(np.isin(own.groups.row_group, list(first))).tolist()
        if served[int(own.groups.rows[at])]
    ]
    if not lines:
        return None
    quantity, at = max(lines)
    row, priority = int(own.groups.rows[-at]), int(own.groups.row_priority[-at])
    return {
        "reference": network.demand.reference[row].decode(),
        "quantity": text(quantity * network.items[own.item].step),
        "priority": None if priority == IN_MONEY else priority,
        "lines": len(lines),
    }
