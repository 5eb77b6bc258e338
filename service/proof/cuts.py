"""Why there is no plan: places that must send more than can come in.

A circulation exists exactly if no set of nodes has minimums on the arcs that leave it above the
capacities of the arcs that enter it (Hoffman 1960). One such set, counted again here, is proof.
"""

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from service.network.options import Options
from service.proof.arcs import ItemArcs
from service.proof.coupled_bounds import Circle
from service.proof.dated_arcs import arcs_of
from service.proof.exact import total
from service.proof.flows import Names, node_of
from service.proof.rulings import Rulings, UnusableNetworkError
from service.proof.shapes import amount
from service.proof.shared_limits import SharedLimits
from service.proof.violations import Findings


def check_cuts(
    options: Options,
    rulings: Rulings,
    certificate: Mapping[str, Any],
    *,
    names: Names,
    findings: Findings,
) -> None:
    """Note every cut that does not prove that there is no plan, and that there is none at all."""
    cuts = certificate["cuts"]
    circles = certificate.get("contradictions", ())
    if not cuts and not circles:
        findings.add("cut_wrong", "there is no cut", place="/cuts")
    if circles:
        try:
            check_contradictions(options, rulings, circles, names, findings)
        except UnusableNetworkError as error:
            findings.add("network_unusable", str(error))
    for position, cut in enumerate(cuts):
        place = f"/cuts/{position}"
        item = names.items.get(cut["item"])
        if item is None:
            findings.add("name_unknown", "there is no such item", place=place)
            continue
        try:
            arcs = arcs_of(names.calendar, options, rulings, item)
        except UnusableNetworkError as error:
            findings.add("network_unusable", str(error), place=cut["item"])
            continue
        _check_cut(arcs, cut, names=names, findings=findings, place=place)


def check_contradictions(
    options: Options,
    rulings: Rulings,
    circles: Sequence[Mapping[str, Any]],
    names: Names,
    findings: Findings,
) -> None:
    """Note every circle of items whose proof does not show that their limits contradict each other.

    A circle without a proof states that no plan was found in whole steps; it proves nothing, and
    the plan says so.
    """
    calendar, network = names.calendar, names.calendar.network
    if calendar.dated or network.head.get("tariffs"):
        findings.add("cut_wrong", "with dates or tariffs limits are of one item", place="/cuts")
        return
    arcs = [arcs_of(calendar, options, rulings, item) for item in range(len(network.items))]
    limits = SharedLimits(network, rulings)
    for position, circle in enumerate(circles):
        place = f"/contradictions/{position}"
        inside = [names.items.get(item, -1) for item in circle["items"]]
        if not inside or min(inside) < 0 or inside != sorted(set(inside)):
            findings.add("name_unknown", "no circle of items", place=place)
            continue
        proof = circle["proof"]
        if proof is None:
            continue
        others = [own for item, own in enumerate(arcs) if item not in inside]
        made = Circle(network, [arcs[item] for item in inside], others, limits=limits, names=names)
        if not made.contradicts(proof, findings, place=place):
            findings.add("cut_wrong", "the limits do not contradict each other", place=place)


def _check_cut(
    arcs: ItemArcs, cut: Mapping[str, Any], *, names: Names, findings: Findings, place: str
) -> None:
    """Note what is wrong with one cut."""
    inside = np.zeros(len(arcs.nodes), dtype=np.bool_)
    inside[0] = cut["root"]
    for entry in cut["nodes"]:
        node = node_of(arcs, entry, names)
        if node is None:
            findings.add("name_unknown", "a cut names a node that is not there", place=place)
            return
        if inside[node]:
            findings.add("listed_twice", "a cut names a node twice", place=place)
            return
        inside[node] = True
    from_inside, to_inside = inside[arcs.tails()], inside[arcs.heads()]
    forced_out = total(arcs.minimums()[from_inside & ~to_inside])
    capacity = arcs.capacities()[to_inside & ~from_inside]
    if bool((capacity < 0).any()):
        findings.add("cut_wrong", "an unlimited arc enters the cut", place=place)
        return
    can_enter = total(capacity)
    if forced_out <= can_enter:
        findings.add("cut_wrong", "no more must leave than can enter", place=place)
    stated = (amount(cut["forced_out"]), amount(cut["can_enter"]))
    if stated != (forced_out * arcs.step, can_enter * arcs.step):
        findings.add("cut_wrong", "the quantities are not those of the cut", place=place)
