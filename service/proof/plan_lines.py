"""Plan lines: every lane and item with goods on it once, in order, and its costs."""

import itertools
from collections import defaultdict
from collections.abc import Mapping, Sequence
from fractions import Fraction

import numpy as np

from service.network.columns import Network
from service.proof.flows import PlanLine
from service.proof.numbers import numbers, numbers_of, together
from service.proof.order_lines import Paths
from service.proof.results import ItemResult, lane_costs, lane_ends
from service.proof.tariff_lanes import freights_of
from service.proof.violations import Findings

_MONEY = ("transport_cost", "supply_cost", "handling_cost", "charges", "cost")


def check_plan_lines(
    network: Network,
    results: Sequence[ItemResult],
    lines: Sequence[PlanLine],
    paths: Paths,
    findings: Findings,
) -> None:
    """Note plan lines that are out of order, missing, or cost other than they say.

    What a line's goods cost where they are drawn must lie between the cheapest and the dearest of
    what is drawn there, and the lines of a site together must cost exactly what is drawn.
    """
    # Characters sort as their UTF-8 bytes do.
    keys = [_key(line) for line in lines]
    if any(former >= latter for former, latter in itertools.pairwise(keys)):
        findings.add("plan_line_wrong", "plan lines are not sorted", place="/plan_lines")
    supply: defaultdict[tuple[int, int], int] = defaultdict(int)
    local: set[tuple[int, int]] = set()
    costs = {result.item: _Costs(network, result, paths) for result in results}
    money, below = together(
        *(numbers([line.document[field] for line in lines]) for field in _MONEY)
    )
    quantity = numbers([line.document["quantity"] for line in lines])
    unit_cost = numbers([line.document["unit_cost"] for line in lines])
    for line, goods, rate, parts in zip(
        lines, quantity.whole, unit_cost.whole, zip(*money, strict=True), strict=True
    ):
        own = costs[line.item]
        if line.row < 0:
            local.add((line.origin, line.item))
            if not own.is_local(line.origin, goods, quantity.below):
                detail = "not what is used where it is drawn"
                findings.add("plan_line_wrong", detail, place=line.place)
        if not own.are_right(
            line, parts, below, quantity=(goods, quantity.below), rate=(rate, unit_cost.below)
        ):
            findings.add("plan_line_wrong", "its costs do not follow", place=line.place)
        supply[(line.origin, line.item)] += parts[1]
    if local != set(paths.local):
        detail = "goods used where they are drawn have no line"
        findings.add("plan_line_wrong", detail, place="/plan_lines")
    for result in results:
        own = costs[result.item]
        for site in result.stock:
            if supply[(site, result.item)] * own.stock_below != own.drawn_cost(site) * below:
                detail = "the lines of a site do not cost what is drawn there"
                findings.add("plan_line_wrong", detail, place=network.sites[site].id)


def _key(line: PlanLine) -> tuple[str, ...]:
    """Return what plan lines are sorted by."""
    document = line.document
    return (
        document["origin"],
        document["destination"],
        document["item"],
        document.get("departs") or "",
        document["lane"] or "",
    )


class _Costs:
    """What goods of one item cost, as whole numbers over common denominators."""

    def __init__(self, network: Network, result: ItemResult, paths: Paths) -> None:
        """Look up every cost that a plan line of the item can have."""
        self._paths, self._item = paths, result.item
        self._step, self._below_step = result.step.numerator, result.step.denominator
        rows = np.array(sorted(result.on_lane), dtype=np.int64)
        found = lane_costs(network, rows, result.item)
        rates, charges = found["transport"], found["charges"]
        self._rate = dict(zip(rows.tolist(), rates.whole, strict=True))
        self._rate_below = rates.below
        self._charge = dict(zip(rows.tolist(), charges.whole, strict=True))
        self._charge_below = charges.below
        freights = freights_of(network)
        self._freight = {
            row: freights.money(row, result.item, steps)
            for row, steps in (result.on_lane.items() if freights is not None else ())
            if freights is not None and freights.tariff(row) is not None
        }
        self._ends = lane_ends(network, rows)
        name = network.items[result.item].id
        handling = numbers_of(site.handling(name) for site in network.sites)
        self._handling, self._handling_below = handling.whole, handling.below
        costs = numbers_of(
            cost * result.step for held in result.stock.values() for cost in held.tier_cost
        )
        self.stock_below = costs.below
        each = iter(costs.whole)
        self._tiers: Mapping[int, list[tuple[int, int]]] = {
            site: [
                (next(each), result.drawn.get((site, tier), 0))
                for tier in range(1, len(held.tier_cost) + 1)
            ]
            for site, held in result.stock.items()
        }

    def is_local(self, site: int, goods: int, below: int) -> bool:
        """Return whether ``goods``/``below`` units are what is used where they are drawn."""
        steps = self._paths.local.get((site, self._item), 0)
        return goods * self._below_step == steps * below * self._step

    def drawn_cost(self, site: int) -> int:
        """Return what all that is drawn at a site costs, over ``stock_below``."""
        return sum(cost * drawn for cost, drawn in self._tiers[site])

    def are_right(
        self,
        line: PlanLine,
        parts: Sequence[int],
        below: int,
        *,
        quantity: tuple[int, int],
        rate: tuple[int, int],
    ) -> bool:
        """Return whether ends, unit cost and every part of the cost of a plan line are right.

        ``parts`` are those of ``_MONEY`` over ``below``.
        """
        transport, supply, handling, charges, cost = parts
        goods, goods_below = quantity
        handled = goods * self._handling[line.origin] * self._below_step
        if line.row < 0:
            ends, per_unit, used_up, charged = (line.origin, line.origin), 0, 0, 0
            first = goods * self._below_step // (goods_below * self._step)
        else:
            ends, per_unit = self._ends[line.row], self._rate[line.row]
            charged = goods * self._charge[line.row]
            key = (line.row, self._item)
            first, used_up = self._paths.first.get(key, 0), self._paths.last.get(key, 0)
            handled += used_up * self._step * self._handling[line.destination] * goods_below
        if line.row in self._freight:
            paid = self._freight[line.row]
            right = Fraction(transport, below) == paid == Fraction(*rate) * Fraction(*quantity)
        else:
            right = rate[0] * self._rate_below == per_unit * rate[1] and (
                transport * goods_below * self._rate_below == goods * per_unit * below
            )
        least, most = self._supply_range(line.origin, first)
        stocked = supply * self.stock_below
        return (
            right
            and ends == (line.origin, line.destination)
            and handling * goods_below * self._below_step * self._handling_below == handled * below
            and charges * goods_below * self._charge_below == charged * below
            and least * below <= stocked <= most * below
            and cost == transport + supply + handling + charges
        )

    def _supply_range(self, site: int, steps: int) -> tuple[int, int]:
        """Return the least and the most that ``steps`` of what is drawn at ``site`` can cost."""
        # Later tiers may be cheaper.
        tiers = sorted(self._tiers.get(site, []))
        if len(tiers) == 1:
            only = min(steps, tiers[0][1]) * tiers[0][0]
            return only, only
        return _first_of(tiers, steps), _first_of(tiers[::-1], steps)


def _first_of(tiers: Sequence[tuple[int, int]], steps: int) -> int:
    """Return the cost of the first ``steps`` of ``tiers``, each a cost of a step and a number."""
    cost = 0
    for of_step, there in tiers:
        taken = min(steps, there)
        cost += taken * of_step
        steps -= taken
    return cost
