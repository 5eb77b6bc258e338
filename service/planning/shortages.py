"""The table of what is short, line by line, with its reason."""

from collections.abc import Mapping

import numpy as np

from service.network.columns import Network
from service.planning.amounts import text
from service.planning.arcs import Kind
from service.planning.bottlenecks import Bottlenecks
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
    first = _First(network, solved, reasons.bottlenecks, served=served)
    for arc in shorts[solved.flow[shorts] > 0].tolist():
        missing, subject = int(solved.flow[arc]), int(own.subject[arc])
        reason = reasons.reason(arc)
        because: dict[str, object] = {"reason": reason.value, "next_chance": None}
        if reason == Reason.OUTRANKED:
            largest = first.ahead_of(arc)
            if largest is not None:
                because["outranked_by"] = largest
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


class _First:
    """Names who went first; what shares a bottleneck and a rank is asked once."""

    def __init__(
        self,
        network: Network,
        solved: ItemFlow,
        bottlenecks: Bottlenecks,
        *,
        served: Mapping[int, int],
    ) -> None:
        """Gather the served lines of every group."""
        self._network = network
        self._own = solved.own
        self._bottlenecks = bottlenecks
        self._known: dict[tuple[frozenset[int], tuple[int, int]], dict[str, object] | None] = {}
        # Steps and the negative position of the line: the largest pair is the largest line, and
        # of equal ones that with the smallest reference.
        self._lines: dict[int, list[tuple[int, int]]] = {}
        groups = solved.own.groups
        for at, (row, group) in enumerate(
            zip(groups.rows.tolist(), groups.row_group.tolist(), strict=True)
        ):
            if group >= 0 and served[row]:
                self._lines.setdefault(group, []).append((served[row], -at))

    def ahead_of(self, short_arc: int) -> dict[str, object] | None:
        """Return the largest line that went first, and how many did; None for kept stock only."""
        place, rank = self._bottlenecks.place_of(short_arc), self._bottlenecks.rank(short_arc)
        if (place, rank) not in self._known:
            self._known[place, rank] = self._largest(self._bottlenecks.went_first(place, rank))
        return self._known[place, rank]

    def _largest(self, arcs: list[int]) -> dict[str, object] | None:
        """Return the largest served line of some groups (of equal ones the smallest reference)."""
        own, network = self._own, self._network
        groups = [int(own.subject[arc]) for arc in arcs if own.kind[arc] == Kind.SHORT]
        lines = [line for group in groups for line in self._lines.get(group, ())]
        if not lines:
            return None
        steps, at = max(lines)
        row, priority = int(own.groups.rows[-at]), int(own.groups.row_priority[-at])
        return {
            "reference": network.demand.reference[row].decode(),
            "quantity": text(steps * network.items[own.item].step),
            "priority": None if priority == IN_MONEY else priority,
            "lines": len(lines),
        }
