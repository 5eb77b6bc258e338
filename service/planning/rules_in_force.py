"""Each rule of the network: whether it applied, and whether the plan feels it."""

import numpy as np

from service.network.columns import IntArray
from service.network.rules import FixedQuantity, Throughput
from service.planning.arcs import Kind
from service.planning.compile import Compiled
from service.planning.prices import reduced_cost
from service.planning.rule_book import Entry
from service.planning.solve import ItemFlow
from service.planning.tariff_segments import natural


def rules_in_force(compiled: Compiled, solved: list[ItemFlow]) -> list[dict[str, object]]:
    """Return one row for each rule, in the order of the network's head.

    ``binding``: a throughput limit is reached; or, under the prices of the certificate, a step
    more (on a lane or site that a closure closes) or a step more or less (on a lane that is fixed)
    would improve the plan. With ``no_plan`` (no flows) nothing is known to bind.
    """
    felt: set[str] = set()
    for flow in solved:
        entries = [entry for entry in compiled.book.entries if entry.items[flow.own.item]]
        if not entries:  # To price every arc takes a tenth of the time of writing a plan.
            continue
        gain = _gain(flow)
        felt.update(entry.rule.id for entry in entries if _binds(entry, flow, gain))
    applied = {entry.rule.id for entry in compiled.book.entries}
    return [
        {
            "rule": rule.name,
            "id": rule.id,
            "note": rule.note,
            "owner": rule.owner,
            "applied": rule.id in applied,
            "binding": rule.id in felt,
        }
        for rule in compiled.book.rules
    ]


def _gain(flow: ItemFlow) -> IntArray:
    """Return the sign of every arc's reduced cost."""
    own = flow.own
    reduced = reduced_cost(own.arcs.with_cost(own.weighted()), flow.price)
    return np.sign(reduced).astype(np.int64)


def _binds(entry: Entry, flow: ItemFlow, gain: IntArray) -> bool:
    """Return whether one rule is felt by the plan of one item."""
    own = flow.own
    rule = entry.rule
    if isinstance(rule, Throughput):
        kind = {"received": Kind.ARRIVE, "sent": Kind.LEAVE, "through": Kind.THROUGH}[rule.flow]
        arcs = own.of_kind(kind)
        site = own.layout.places.site[own.subject[arcs]]
        arcs, site = arcs[entry.sites[site]], site[entry.sites[site]]
        limit = own.layout.limit[rule.flow][site]
        return bool((flow.flow[arcs] == limit).any())
    picked = entry.lanes[own.lanes.rows]
    on_lanes = gain[: picked.shape[0]][picked]
    if isinstance(rule, FixedQuantity):
        first, width = own.lanes.first, own.lanes.width
        if first is not None and width is not None:
            lanes = slice(0, picked.shape[0])
            follow = natural(width, flow.flow[lanes], gain[lanes], first)
            on_lanes = on_lanes[~follow[picked]]
        return bool((on_lanes != 0).any())
    if bool((on_lanes < 0).any()):
        return True
    arcs = own.of_kind(Kind.THROUGH, Kind.PASS)
    site = own.layout.places.site[own.subject[arcs]]
    return bool((gain[arcs[entry.sites[site]]] < 0).any())
