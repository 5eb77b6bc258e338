"""Each rule of the network: whether it applied, and whether the plan feels it."""

from fractions import Fraction

import numpy as np

from service.network.columns import IntArray
from service.network.rules import FixedQuantity, SharedCapacity, Throughput
from service.planning.coupled.items import CoupledPlan
from service.planning.documents.amounts import Document, text
from service.planning.documents.coupled_proof import named_limits
from service.planning.flow.prices import reduced_cost
from service.planning.model.arcs import Kind
from service.planning.model.compile import Compiled
from service.planning.model.rule_book import Entry
from service.planning.model.tariff_segments import natural
from service.planning.solution import Solution
from service.planning.solve import ItemFlow

MILLION = 10**6


def rules_in_force(compiled: Compiled, solution: Solution) -> list[Document]:
    """Return one row for each rule, in the order of the network's head.

    ``binding``: a throughput limit is reached; or, under the prices of the certificate, a step
    more (on a lane or site that a closure closes) or a step more or less (on a lane that is fixed)
    would improve the plan. A shared limit binds where it is reached or has a price; ``one_more``
    has what one more of it in its measure changes of the cost, by that price. With ``no_plan`` (no
    flows) nothing is known to bind.
    """
    felt: set[str] = set()
    for flow in solution.flows:
        entries = [entry for entry in compiled.book.entries if entry.items[flow.own.item]]
        if not entries:  # To price every arc takes a tenth of the time of writing a plan.
            continue
        gain = _gain(flow)
        felt.update(entry.rule.id for entry in entries if _binds(entry, flow, gain))
    worth: dict[str, list[Document]] = {}
    for made in solution.coupled:
        felt |= _at_their_limit(made)
        for rule, row in _one_more(compiled, made):
            worth.setdefault(rule, []).append(row)
    applied = {entry.rule.id for entry in compiled.book.entries}
    return [
        {
            "rule": rule.name,
            "id": rule.id,
            "note": rule.note,
            "owner": rule.owner,
            "applied": rule.id in applied,
            "binding": rule.id in felt or rule.id in worth,
            **({"one_more": worth[rule.id]} if rule.id in worth else {}),
        }
        for rule in compiled.book.rules
    ]


def _at_their_limit(made: CoupledPlan) -> set[str]:
    """Return the rules with a shared limit that the plan reaches."""
    limits = made.limits
    activity = limits.activity(made.flows)
    reached = (activity == limits.upper) | (activity == limits.lower)
    names = (limits.names[row].rule for row in np.flatnonzero(reached).tolist())
    return {rule for rule in names if rule is not None}


def _one_more(compiled: Compiled, made: CoupledPlan) -> list[tuple[str, Document]]:
    """Return (rule, what one more of its limit changes of the cost) by its price, dearest first."""
    proof = made.steps[-1].proof
    assert proof is not None  # noqa: S101 - the step of cost always has one
    limits, scale = made.limits, compiled.cost_scale * proof.fineness
    found = [
        (
            str(name["rule"]),
            {
                "site": name["site"],
                "lane": name["lane"],
                "measure": limits.measures[row],
                "cost": text(rounded(-number / (scale * limits.grain[row]))),
            },
        )
        for row, number, name in named_limits(compiled.network, limits, proof.multiplier)
        if name["rule"] is not None
    ]
    return sorted(found, key=lambda pair: -abs(Fraction(str(pair[1]["cost"]))))


def rounded(value: Fraction) -> Fraction:
    """Return a price at 6 decimals, half away from zero, as people read it."""
    units = (2 * abs(value) * MILLION + 1) // 2
    return Fraction(units if value >= 0 else -units, MILLION)


def _gain(flow: ItemFlow) -> IntArray:
    """Return the sign of every arc's reduced cost."""
    own = flow.own
    reduced = flow.reduced
    if reduced is None:
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
    if isinstance(rule, SharedCapacity):
        return False  # Told by its rows.
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
