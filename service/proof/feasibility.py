"""Whether a flow respects every limit and gets nowhere lost."""

import numpy as np

from service.network.columns import IntArray, Network
from service.proof.arcs import ItemArcs
from service.proof.exact import Whole, sums_at
from service.proof.flows import describe
from service.proof.violations import EXAMPLES_MAX, Findings


def check_feasibility(network: Network, arcs: ItemArcs, flow: Whole, findings: Findings) -> None:
    """Note every arc whose flow is out of its limits and every node that does not balance."""
    for position in broken_limits(arcs, flow)[: EXAMPLES_MAX + 1].tolist():
        detail = f"{int(flow[position])} steps do not fit its limits"
        findings.add("limit_broken", detail, place=describe(arcs, position, network))
    moved = np.flatnonzero(flow != 0)
    tail, head = arcs.ends(moved)
    entered = sums_at(len(arcs.nodes), head, flow[moved])
    left = sums_at(len(arcs.nodes), tail, flow[moved])
    for place in np.flatnonzero(entered != left)[: EXAMPLES_MAX + 1].tolist():
        node = arcs.nodes[place]
        site = "" if node.site < 0 else network.sites[node.site].id
        findings.add(
            "not_conserved",
            f"{entered[place]} steps come in and {left[place]} go out",
            place=f"{network.items[arcs.item].id}: {site} {node.side} {node.qualifier or ''}",
        )


def broken_limits(arcs: ItemArcs, flow: Whole) -> IntArray:
    """Return the positions of arcs whose flow is below the minimum or above the capacity."""
    found = []
    for first, part in arcs.parts():
        carried = flow[first : first + len(part.tail)]
        broken = carried < part.minimum
        broken |= (part.capacity >= 0) & (carried > part.capacity)
        found.append(first + np.flatnonzero(broken))
    return np.concatenate(found)
