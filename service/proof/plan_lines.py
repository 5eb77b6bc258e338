"""Plan lines: every lane and item with goods on it once, in order, and its costs."""

import itertools
from collections import defaultdict
from collections.abc import Sequence
from fractions import Fraction

from service.network.columns import Network
from service.proof.flows import PlanLine
from service.proof.order_lines import Paths
from service.proof.results import ItemResult, lane_cost
from service.proof.shapes import amount
from service.proof.violations import Findings


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
    keys = [_key(line) for line in lines]
    if any(former >= latter for former, latter in itertools.pairwise(keys)):
        findings.add("plan_line_wrong", "plan lines are not sorted", place="/plan_lines")
    by_item = {result.item: result for result in results}
    supply: defaultdict[tuple[int, int], Fraction] = defaultdict(Fraction)
    local = set()
    for line in lines:
        steps = amount(line.document["quantity"]) / by_item[line.item].step
        if line.row < 0:
            local.add((line.origin, line.item))
            if steps != paths.local.get((line.origin, line.item), 0):
                detail = "not what is used where it is drawn"
                findings.add("plan_line_wrong", detail, place=line.place)
        if not _costs_right(network, by_item[line.item], line, paths):
            findings.add("plan_line_wrong", "its costs do not follow", place=line.place)
        supply[(line.origin, line.item)] += amount(line.document["supply_cost"])
    if local != set(paths.local):
        detail = "goods used where they are drawn have no line"
        findings.add("plan_line_wrong", detail, place="/plan_lines")
    for result in results:
        for site, held in result.stock.items():
            drawn = sum(
                result.drawn.get((site, tier), 0) * result.step * cost
                for tier, cost in enumerate(held.tier_cost, start=1)
            )
            if supply[(site, result.item)] != drawn:
                detail = "the lines of a site do not cost what is drawn there"
                findings.add("plan_line_wrong", detail, place=network.sites[site].id)


def _key(line: PlanLine) -> tuple[bytes, ...]:
    """Return what plan lines are sorted by."""
    document = line.document
    names = (document["origin"], document["destination"], document["item"], document["lane"] or "")
    return tuple(name.encode() for name in names)


def _costs_right(network: Network, result: ItemResult, line: PlanLine, paths: Paths) -> bool:
    """Return whether ends, unit cost and every part of the cost of a plan line are right."""
    document, item = line.document, network.items[line.item].id
    quantity = amount(document["quantity"])
    handling = quantity * network.sites[line.origin].handling(item)
    if line.row < 0:
        ends_right = line.origin == line.destination
        unit_cost = Fraction(0)
        first = quantity / result.step
    else:
        key = (line.row, line.item)
        lanes = network.lanes
        ends_right = (
            line.origin == lanes.origin[line.row]
            and line.destination == lanes.destination[line.row]
        )
        unit_cost = lane_cost(network, line.row, line.item)
        consumed = paths.last.get(key, 0) * result.step
        handling += consumed * network.sites[line.destination].handling(item)
        first = Fraction(paths.first.get(key, 0))
    transport = quantity * unit_cost
    supply = amount(document["supply_cost"])
    least, most = _supply_range(result, line.origin, first)
    return (
        ends_right
        and amount(document["unit_cost"]) == unit_cost
        and amount(document["transport_cost"]) == transport
        and amount(document["handling_cost"]) == handling
        and amount(document["charges"]) == 0
        and least <= supply <= most
        and amount(document["cost"]) == transport + supply + handling
    )


def _supply_range(result: ItemResult, site: int, steps: Fraction) -> tuple[Fraction, Fraction]:
    """Return the least and the most that ``steps`` of what is drawn at ``site`` can cost."""
    held = result.stock.get(site)
    if held is None:
        return Fraction(0), Fraction(0)
    tiers = [
        (cost * result.step, result.drawn.get((site, tier), 0))
        for tier, cost in enumerate(held.tier_cost, start=1)
    ]
    return _first_of(tiers, steps), _first_of(tiers[::-1], steps)


def _first_of(tiers: Sequence[tuple[Fraction, int]], steps: Fraction) -> Fraction:
    """Return the cost of the first ``steps`` of ``tiers``, each a cost of a step and a number."""
    cost = Fraction(0)
    for of_step, there in tiers:
        taken = min(steps, Fraction(there))
        cost += taken * of_step
        steps -= taken
    return cost
