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
from service.proof.arcs import ItemArcs, Node, scaled_costs
from service.proof.exact import Whole, magnitude, plus, times, whole
from service.proof.flows import Names, describe
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
    base = int(proof["base"])
    if base < least_base(arcs, money):
        findings.add("weights_too_small", "the base of the weights is too small", place=place)
    if price is None:
        return
    cost = plus(money, weights(arcs, base))
    for position in contradictions(arcs, flow, cost=cost, price=price)[: EXAMPLES_MAX + 1].tolist():
        detail = f"{int(flow[position])} steps contradict the prices at its ends"
        findings.add("not_optimal", detail, place=describe(arcs, position, network))


def least_base(arcs: ItemArcs, money: Whole) -> int:
    """Return the least C that proves the order of priorities: 2 * nodes * max |cost| + 1."""
    return 2 * len(arcs.nodes) * magnitude(money) + 1


def weights(arcs: ItemArcs, base: int) -> Whole:
    """Return what one step short costs on each arc by its priority, 0 on all other arcs."""
    ranks = arcs.ranks()
    above_last = len(arcs.priorities) + 1
    return times(np.where(ranks > 0, above_last - ranks, 0), base)


def contradictions(arcs: ItemArcs, flow: Whole, *, cost: Whole, price: Whole) -> IntArray:
    """Return the positions of arcs on which flow and prices contradict least cost.

    ``cost`` has shape (arcs,), ``price`` shape (nodes,), both scaled money per step. An unlimited
    arc has capacity -1, which no flow equals. Empty means proven, given a feasible flow.
    """
    reduced = plus(plus(cost, price[arcs.tails()]), -price[arcs.heads()])
    not_full = (reduced < 0) & (flow != arcs.capacities())
    not_least = (reduced > 0) & (flow != arcs.minimums())
    return np.flatnonzero(not_full | not_least)


def _prices(
    network: Network,
    arcs: ItemArcs,
    proof: Mapping[str, Any],
    names: Names,
    findings: Findings,
) -> Whole | None:
    """Return the price of each node, 0 at the root; None if the certificate does not say them."""
    prices: dict[int, int] = {0: 0}
    sound = True
    for position, entry in enumerate(proof["prices"]):
        place = f"/items/{proof['item']}/prices/{position}"
        site = names.sites.get(entry["site"], -1)
        node = arcs.place.get(Node(site, entry["side"], entry["qualifier"]))
        if node is None:
            findings.add("name_unknown", "there is no such node", place=place)
            sound = False
        elif node in prices:
            findings.add("listed_twice", "a node has two prices", place=place)
            sound = False
        else:
            prices[node] = int(entry["price"])
    if not sound:
        return None
    missing = [known for known, at in arcs.place.items() if at not in prices]
    for known in missing:
        name = f"{network.sites[known.site].id} {known.side} {known.qualifier or ''}"
        findings.add("price_missing", "a node has no price", place=name)
    return None if missing else whole([prices[at] for at in range(len(arcs.nodes))])
