"""Order lines: what was ordered, what each gets, from which stock, and on which way."""

import json
from collections import defaultdict
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

from service.network.columns import Network
from service.network.naming import lane_rows
from service.network.units import item_units
from service.proof.exact import Positions
from service.proof.flows import steps_of
from service.proof.groups import OrderLine
from service.proof.results import ItemResult
from service.proof.shapes import amount
from service.proof.usable import cross_docks
from service.proof.violations import Findings


@dataclass(frozen=True, slots=True, kw_only=True)
class Paths:
    """What the sources of all order lines add up to, in steps.

    By (row of a lane, item): on it, first on it, and last on it; by (site, item): used where it was
    drawn; and the references served over a lane, by its row.
    """

    on_lane: Mapping[tuple[int, int], int]
    first: Mapping[tuple[int, int], int]
    last: Mapping[tuple[int, int], int]
    local: Mapping[tuple[int, int], int]
    references: Mapping[int, set[str]]


def check_order_lines(
    network: Network,
    results: Sequence[ItemResult],
    documents: Sequence[Mapping[str, Any]],
    findings: Findings,
) -> Paths | None:
    """Note what is wrong with order lines; return their paths, None if they cannot be followed."""
    references = [reference.decode() for reference in network.demand.reference.tolist()]
    if [line["reference"] for line in documents] != references:
        findings.add("order_line_wrong", "not the order lines of the network", place="/order_lines")
        return None
    sites = {site.id: place for place, site in enumerate(network.sites)}
    legs = _Legs(network, documents)
    sums = _Sums(network, results)
    sound = True
    for result in results:
        for line in result.wanted.lines:
            document = documents[line.row]
            place = f"/order_lines/{line.row}"
            if not _is_ordered(network, result, line, document):
                findings.add("order_line_wrong", "not what was ordered", place=place)
            if not _adds_up(document):
                findings.add("order_line_wrong", "it does not add up", place=place)
            for position, source in enumerate(document["sources"]):
                where = f"{place}/sources/{position}"
                steps = steps_of(source["quantity"], result.step)
                rows = legs.route(result, line, source, sites=sites)
                if steps is None:
                    findings.add("order_line_wrong", "no whole steps above 0", place=where)
                    sound = False
                elif rows is None:
                    findings.add("route_wrong", "no way from its origin to its site", place=where)
                    sound = False
                else:
                    sums.add(line, source, rows, steps=steps, item=result.item, sites=sites)
            served = amount(document["served"]) / result.step
            sums.served[(result.item, line.group)] += served
    if not sound:
        return None
    sums.check(findings)
    return sums.paths()


def _is_ordered(
    network: Network, result: ItemResult, line: OrderLine, document: Mapping[str, Any]
) -> bool:
    """Return whether an order line repeats what the network says about it."""
    demand, row, item = network.demand, line.row, network.items[result.item]
    units = item_units(item, str(demand.unit.text(row)))
    ordered = (demand.quantity.fraction(row) or Fraction(0)) * (units or 0)
    wanted = line.wanted * result.step
    expected: dict[str, object] = {
        "reference": document["reference"],
        "order": demand.order.text(row),
        "site": network.sites[line.site].id,
        "item": item.id,
        "quantity": wanted,
        "priority": line.priority or None,
    }
    if line.shortage_cost is not None:
        expected["shortage_cost"] = line.shortage_cost
    if ordered != wanted:
        expected["ordered"] = ordered
    for field, column in (("tags", demand.tags), ("extra", demand.extra)):
        text = column.text(row)
        if text is not None:
            expected[field] = json.loads(text)
    numbers = ("quantity", "shortage_cost", "ordered")
    stated = {
        key: amount(value) if key in numbers else value
        for key, value in document.items()
        if key not in ("served", "short", "sources")
    }
    return stated == expected


def _adds_up(document: Mapping[str, Any]) -> bool:
    """Return whether sources make up what is served, and that with what is short all is said."""
    served, short = amount(document["served"]), amount(document["short"])
    sources = document["sources"]
    ways = {
        (source["origin"], source["lot"], tuple(leg["lane"] for leg in source["legs"]))
        for source in sources
    }
    return (
        served >= 0
        and short >= 0
        and served + short == amount(document["quantity"])
        and sum((amount(source["quantity"]) for source in sources), Fraction(0)) == served
        and len(ways) == len(sources)
    )


class _Legs:
    """Follows sources over lanes."""

    def __init__(self, network: Network, documents: Sequence[Mapping[str, Any]]) -> None:
        """Find every lane that a leg names, once."""
        names = {
            leg["lane"]
            for line in documents
            for source in line["sources"]
            for leg in source["legs"]
        }
        self._network = network
        self._rows = dict(zip(names, lane_rows(network, names), strict=True))
        self._passing = cross_docks(network)

    def route(
        self,
        result: ItemResult,
        line: OrderLine,
        source: Mapping[str, Any],
        *,
        sites: Mapping[str, int],
    ) -> list[int] | None:
        """Return the lanes from a source's origin to the site of its line, None if there is no way.

        Only lanes that carry something of the item count, and only cross-docks pass goods on.
        """
        origin = sites.get(source["origin"], -1)
        if origin < 0 or source["item"] != self._network.items[result.item].id:
            return None
        if line.origins is not None and origin not in line.origins:
            return None
        lanes = self._network.lanes
        rows = [self._rows[leg["lane"]] for leg in source["legs"]]
        here = origin
        for position, row in enumerate(rows):
            if row not in result.on_lane or int(lanes.origin[row]) != here:
                return None
            if position and not self._passing[here]:
                return None
            here = int(lanes.destination[row])
        return rows if here == line.site else None


class _Sums:
    """Adds up what sources use, and compares it with what the flow has."""

    def __init__(self, network: Network, results: Sequence[ItemResult]) -> None:
        """Start with nothing used."""
        self._network = network
        self._results = results
        self.served: defaultdict[tuple[int, int], Fraction] = defaultdict(Fraction)
        self._lots: defaultdict[tuple[int, int, str | None], int] = defaultdict(int)
        self._on: defaultdict[tuple[int, int], int] = defaultdict(int)
        self._first: defaultdict[tuple[int, int], int] = defaultdict(int)
        self._last: defaultdict[tuple[int, int], int] = defaultdict(int)
        self._local: defaultdict[tuple[int, int], int] = defaultdict(int)
        self._references: defaultdict[int, set[str]] = defaultdict(set)

    def add(  # noqa: PLR0913 - a source has that many sides
        self,
        line: OrderLine,
        source: Mapping[str, Any],
        rows: Sequence[int],
        *,
        steps: int,
        item: int,
        sites: Mapping[str, int],
    ) -> None:
        """Count one source of an order line, which goes over the lanes ``rows``."""
        self._lots[(sites[source["origin"]], item, source["lot"])] += steps
        reference = self._network.demand.reference[line.row].decode()
        for row in rows:
            self._on[(row, item)] += steps
            self._references[row].add(reference)
        if rows:
            self._first[(rows[0], item)] += steps
            self._last[(rows[-1], item)] += steps
        else:
            self._local[(line.site, item)] += steps

    def paths(self) -> Paths:
        """Return what was counted."""
        return Paths(
            on_lane=self._on,
            first=self._first,
            last=self._last,
            local=self._local,
            references=self._references,
        )

    def check(self, findings: Findings) -> None:
        """Note where groups, lots and lanes do not agree with the flow."""
        for result in self._results:
            item = self._network.items[result.item].id
            for number, group in enumerate(result.wanted.groups):
                flow = result.served.get((group.site, group.label), 0)
                if self.served[(result.item, number)] != flow:
                    detail = "the lines of a group get other than its flow"
                    findings.add("order_line_wrong", detail, place=f"{item}: {group.label}")
            if not self._is_balanced(result):
                findings.add("lane_use_wrong", "sources and flow differ on a lane", place=item)
        expected: defaultdict[tuple[int, int, str | None], int] = defaultdict(int)
        for result in self._results:
            for (site, lot), steps in _lots_drawn(result).items():
                expected[(site, result.item, lot)] += steps
        if expected != {key: steps for key, steps in self._lots.items() if steps}:
            findings.add("lot_wrong", "not the lots at the head of the stock", place="/order_lines")

    def _is_balanced(self, result: ItemResult) -> bool:
        """Return whether what no source uses of the flow on lanes only circles."""
        lanes = self._network.lanes
        balance: defaultdict[int, int] = defaultdict(int)
        for row, steps in result.on_lane.items():
            rest = steps - self._on.get((row, result.item), 0)
            if rest < 0:
                return False
            balance[_at(lanes.origin, row)] -= rest
            balance[_at(lanes.destination, row)] += rest
        return not any(balance.values())


def _at(column: Positions, row: int) -> int:
    """Return a position as a Python number."""
    return int(column[row])


def _lots_drawn(result: ItemResult) -> dict[tuple[int, str | None], int]:
    """Return what is drawn by (site, lot): the rows of a tier are used up in their order."""
    drawn: dict[tuple[int, str | None], int] = {}
    for site, held in result.stock.items():
        left = {
            tier: result.drawn.get((site, tier), 0) for tier in range(1, len(held.tier_steps) + 1)
        }
        for row in held.rows:
            taken = min(row.steps, left[row.tier])
            left[row.tier] -= taken
            if taken:
                drawn[(site, row.lot)] = drawn.get((site, row.lot), 0) + taken
    return drawn
