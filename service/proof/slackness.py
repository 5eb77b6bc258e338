"""Complementary slackness over every arc: the proof that no flow costs less.

With node prices, an arc from i to j has the reduced cost c + price(i) - price(j). A feasible flow
is of least cost if every arc above 0 carries its minimum and every arc below 0 its capacity (Ahuja,
Magnanti and Orlin, *Network Flows*, 1993, section 9.3). Shortage has weights: one step short of the
r-th of T priorities costs (T + 1 - r) * C. They prove the order of priorities if C is more than any
cycle can cost otherwise (DEVELOPERS.md, "What is computed"), which is checked here.
"""

from collections.abc import Mapping
from fractions import Fraction
from typing import Any

import numpy as np

from service.network.columns import IntArray, Network
from service.proof.arcs import Costs, ItemArcs
from service.proof.costs import scaled_costs
from service.proof.exact import ROOM, Whole, magnitude, plus, times, whole
from service.proof.flows import Names, describe, node_of
from service.proof.money import charges_by_code
from service.proof.tariff_lanes import freights_of, tariff_contradictions, with_tariffs
from service.proof.violations import EXAMPLES_MAX, Findings


def check_slackness(  # noqa: PLR0913 - network, flow and prices come from three documents
    network: Network,
    arcs: ItemArcs,
    flow: Whole,
    proof: Mapping[str, Any],
    *,
    scale: Fraction,
    names: Names,
    findings: Findings,
) -> None:
    """Note what keeps flow and prices from proving that the flow is of least cost."""
    place = f"/items/{proof['item']}"
    money = scaled_costs(network, arcs, scale)
    if money is None:
        findings.add("cost_scale_wrong", "a cost times the scale is not whole", place=place)
    price = _prices(network, arcs, proof, names, findings)
    if money is None:
        return
    base, late_base = int(proof["base"]), int(proof.get("late_base", "0"))
    weights = late_weights(arcs)
    weighs = bool((weights != 0).any())
    if weighs != ("late_base" in proof) or (weighs and late_base < least_base(arcs, money)):
        findings.add("weights_too_small", "the base of lateness does not prove it", place=place)
    money = Costs(money.lanes, plus(money.others, times(weights, late_base)))
    if base < least_base(arcs, money):
        findings.add("weights_too_small", "the base of the weights is too small", place=place)
    if price is None:
        return
    cost = weighted(arcs, money, base)
    found = contradictions(arcs, flow, cost=cost, price=price).tolist()
    freights = freights_of(network)
    if freights is not None:
        by_tariff = with_tariffs(arcs.rows, network)
        found = [at for at in found if at >= len(arcs.rows) or not by_tariff[at]]
        per_unit = charges_by_code(network, arcs.item, arcs.rows)
        charges = {code: money * arcs.step for code, money in per_unit.items()}
        found += tariff_contradictions(
            freights, network, arcs, flow, price=price, charges=charges, scale=scale
        )
    for position in found[: EXAMPLES_MAX + 1]:
        detail = f"{int(flow[position])} steps contradict the prices at its ends"
        findings.add("not_optimal", detail, place=describe(arcs, position, network))


def least_base(arcs: ItemArcs, money: Costs) -> int:
    """Return the least C that proves the order of priorities: 2 * nodes * max |cost| + 1."""
    return 2 * len(arcs.nodes) * money.magnitude() + 1


def late_weights(arcs: ItemArcs) -> Whole:
    """Return what lateness on each arc that is no lane weighs, a step of it."""
    return whole([arcs.late[at].weight if at in arcs.late else 0 for at in range(len(arcs.arcs))])


def weighted(arcs: ItemArcs, money: Costs, base: int) -> Costs:
    """Return ``money``, and on shortage of the r-th of T priorities (T + 1 - r) * ``base`` more.

    No lane is one, so that only the few other arcs are added to.
    """
    above_last = len(arcs.priorities) + 1
    ranks = np.array([arc.rank for arc in arcs.arcs], dtype=np.int64)
    others = plus(money.others, times(np.where(ranks > 0, above_last - ranks, 0), base))
    return Costs(money.lanes, others)


def contradictions(arcs: ItemArcs, flow: Whole, *, cost: Costs, price: Whole) -> IntArray:
    """Return the positions of arcs on which flow and prices contradict least cost.

    ``flow`` has shape (arcs,), lanes first, ``price`` shape (nodes,) in scaled money per step, as
    ``cost`` is. An unlimited arc has capacity -1, which no flow equals. Empty means proven, given a
    feasible flow.
    """
    if cost.magnitude() + 2 * magnitude(price) >= ROOM:
        cost, price = Costs(*(part.astype(object) for part in cost)), price.astype(object)
    lanes, found = len(arcs.rows), []
    for first, part in arcs.parts():
        stop = first + len(part.tail)
        own = cost.lanes[first:stop] if first < lanes else cost.others
        reduced = own + price[part.tail]
        reduced -= price[part.head]
        carried = flow[first:stop]
        not_full = (reduced < 0) & (carried != part.capacity)
        not_least = (reduced > 0) & (carried != part.minimum)
        found.append(first + np.flatnonzero(not_full | not_least))
    return np.concatenate(found)


def _prices(
    network: Network,
    arcs: ItemArcs,
    proof: Mapping[str, Any],
    names: Names,
    findings: Findings,
) -> Whole | None:
    """Return the price of each node, 0 at the root; None if the certificate does not say them."""
    entries = proof["prices"]
    nodes = [node_of(arcs, entry, names) for entry in entries]
    seen = {0}
    for position, node in enumerate(nodes):
        if node is not None and node not in seen:
            seen.add(node)
            continue
        place = f"/items/{proof['item']}/prices/{position}"
        if node is None:
            findings.add("name_unknown", "there is no such node", place=place)
        else:
            findings.add("listed_twice", "a node has two prices", place=place)
    if len(seen) <= len(nodes):
        return None
    if len(seen) < len(arcs.nodes):
        for known, at in arcs.place.items():
            if at not in seen:
                site, side, qualifier = known
                name = f"{network.sites[site].id} {side} {qualifier or ''}"
                findings.add("price_missing", "a node has no price", place=name)
        return None
    values = [0] * len(arcs.nodes)
    for node, entry in zip(nodes, entries, strict=True):
        values[node or 0] = int(entry["price"])
    return whole(values)
