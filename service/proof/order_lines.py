"""Order lines: what was ordered, what each gets, from which stock, and on which way."""

import itertools
import json
from collections import defaultdict
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np

from service.network.columns import Network
from service.network.units import item_units
from service.proof.calendar import Calendar
from service.proof.flows import PlanLine
from service.proof.groups import OrderLine
from service.proof.numbers import numbers, together
from service.proof.order_dates import OrderDates
from service.proof.results import ItemResult, lane_ends
from service.proof.routes import Routes
from service.proof.shapes import amount
from service.proof.violations import Findings

_QUANTITIES = ("quantity", "served", "short")
# The fields of an order line that says nothing but where, what, how much and how urgently.
_PLAIN_FIELDS = 9


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
    calendar: Calendar,
    results: Sequence[ItemResult],
    lines: Sequence[PlanLine],
    documents: Sequence[Mapping[str, Any]],
    findings: Findings,
) -> Paths | None:
    """Note what is wrong with order lines; return their paths, None if they cannot be followed.

    ``lines`` are the plan lines: a leg goes over one of them, or over a lane that carries nothing.
    """
    network = calendar.network
    references = [reference.decode() for reference in network.demand.reference.tolist()]
    if [line["reference"] for line in documents] != references:
        findings.add("order_line_wrong", "not the order lines of the network", place="/order_lines")
        return None
    amounts = _Amounts(documents)
    legs = Routes(calendar, lines)
    sums = _Sums(network, results)
    dates = OrderDates(calendar)
    sound = True
    for result in results:
        ordered = _Ordered(network, result, amounts, dates)
        steps_of = amounts.in_steps(result.step)
        for line in result.wanted.lines:
            document = documents[line.row]
            place = f"/order_lines/{line.row}"
            if not ordered.is_repeated(line, document):
                findings.add("order_line_wrong", "not what was ordered", place=place)
            if not amounts.add_up(line.row):
                findings.add("order_line_wrong", "it does not add up", place=place)
            for position, source in enumerate(document["sources"]):
                steps = steps_of[amounts.first[line.row] + position]
                origin, rows = legs.route(result, line, source)
                if steps is None:
                    where = f"{place}/sources/{position}"
                    findings.add("order_line_wrong", "no whole steps above 0", place=where)
                    sound = False
                elif rows is None:
                    where = f"{place}/sources/{position}"
                    findings.add("route_wrong", "no way from its origin to its site", place=where)
                    sound = False
                else:
                    sums.late[(result.item, line.group)] += steps * dates.late(line.row, source)
                    sums.add(line, source, rows, steps=steps, item=result.item, origin=origin)
            sums.served[(result.item, line.group)] += amounts.served[line.row]
    if not sound:
        return None
    sums.check(findings, below=amounts.below)
    return sums.paths()


class _Amounts:
    """The quantities of all order lines and their sources, over one denominator."""

    def __init__(self, documents: Sequence[Mapping[str, Any]]) -> None:
        """Read them."""
        self._sources = numbers(
            [source["quantity"] for line in documents for source in line["sources"]]
        )
        (self.quantity, self.served, self._short, self._from), self.below = together(
            *(numbers([line[field] for line in documents]) for field in _QUANTITIES),
            self._sources,
        )
        counts = [len(line["sources"]) for line in documents]
        self.first = [0, *itertools.accumulate(counts)]
        self._documents = documents

    def in_steps(self, step: Fraction) -> list[int | None]:
        """Return what each source brings in steps, None where it is no whole number above 0."""
        return self._sources.in_steps(step)

    def add_up(self, row: int) -> bool:
        """Return whether sources make up what is served, and that and what is short all."""
        served, short = self.served[row], self._short[row]
        first, last = self.first[row], self.first[row + 1]
        if last - first > 1:
            sources = self._documents[row]["sources"]
            ways = {
                (
                    source["origin"],
                    source["lot"],
                    source.get("arrives"),
                    tuple((leg["lane"], leg.get("departs")) for leg in source["legs"]),
                )
                for source in sources
            }
            if len(ways) != len(sources):
                return False
        return (
            served >= 0
            and short >= 0
            and served + short == self.quantity[row]
            and sum(self._from[first:last]) == served
        )


class _Ordered:
    """Compares order lines of one item with what the network says about them."""

    def __init__(
        self, network: Network, result: ItemResult, amounts: _Amounts, dates: OrderDates
    ) -> None:
        """Look up what is the same for all of them."""
        self._dates = dates
        self._amounts = amounts
        self._step, self._below_step = result.step.numerator, result.step.denominator
        self._network, self._result = network, result
        self._item = network.items[result.item].id
        self._sites = [site.id for site in network.sites]
        demand = network.demand
        # Most lines say nothing but where, what, how much and how urgently.
        self._plain = not (dates.dated or demand.tags.values or demand.extra.values)
        codes = demand.order.codes.tolist()
        self._order = [None if code < 0 else demand.order.values[code] for code in codes]

    def is_repeated(self, line: OrderLine, document: Mapping[str, Any]) -> bool:
        """Return whether an order line repeats what the network says about it."""
        if self._plain and line.exact and line.priority and len(document) == _PLAIN_FIELDS:
            return (
                document["order"] == self._order[line.row]
                and document["site"] == self._sites[line.site]
                and document["item"] == self._item
                and document["priority"] == line.priority
                and self._amounts.quantity[line.row] * self._below_step
                == line.wanted * self._step * self._amounts.below
            )
        return _is_ordered(self._network, self._result, line, document, self._dates)


def _is_ordered(
    network: Network,
    result: ItemResult,
    line: OrderLine,
    document: Mapping[str, Any],
    dates: OrderDates,
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
    expected |= dates.repeated(row, document)
    for field, column in (("tags", demand.tags), ("extra", demand.extra)):
        text = column.text(row)
        if text is not None:
            expected[field] = json.loads(text)
    exact = ("quantity", "shortage_cost", "ordered")
    stated = {
        key: amount(value) if key in exact else value
        for key, value in document.items()
        if key not in ("served", "short", "sources")
    }
    return stated == expected


class _Sums:
    """Adds up what sources use, and compares it with what the flow has."""

    def __init__(self, network: Network, results: Sequence[ItemResult]) -> None:
        """Start with nothing used."""
        self._network = network
        self._results = results
        self._names = [reference.decode() for reference in network.demand.reference.tolist()]
        # Over the denominator of ``_Amounts``.
        self.served: defaultdict[tuple[int, int], int] = defaultdict(int)
        # In steps and days.
        self.late: defaultdict[tuple[int, int], int] = defaultdict(int)
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
        origin: int,
    ) -> None:
        """Count one source of an order line, which goes over the lanes ``rows``."""
        self._lots[(origin, item, source["lot"])] += steps
        for row in rows:
            self._on[(row, item)] += steps
            self._references[row].add(self._names[line.row])
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

    def check(self, findings: Findings, *, below: int) -> None:
        """Note where groups, lots and lanes do not agree with the flow.

        ``below`` is what ``served`` is over.
        """
        for result in self._results:
            item = self._network.items[result.item].id
            above, under = result.step.numerator * below, result.step.denominator
            for number, group in enumerate(result.wanted.groups):
                flow = result.served.get((group.site, group.label), 0)
                if self.served[(result.item, number)] * under != flow * above:
                    detail = "the lines of a group get other than its flow"
                    findings.add("order_line_wrong", detail, place=f"{item}: {group.label}")
                late = result.late_days.get((group.site, group.label), 0)
                if self.late[(result.item, number)] != late:
                    detail = "the lines of a group are later, or earlier, than its flow"
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
        rests = {
            row: steps - self._on.get((row, result.item), 0)
            for row, steps in result.on_lane.items()
        }
        if any(rest < 0 for rest in rests.values()):
            return False
        circling = np.array([row for row, rest in rests.items() if rest], dtype=np.int64)
        balance: defaultdict[int, int] = defaultdict(int)
        for row, (start, end) in lane_ends(self._network, circling).items():
            balance[start] -= rests[row]
            balance[end] += rests[row]
        return not any(balance.values())


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
