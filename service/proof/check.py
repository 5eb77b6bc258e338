"""Whether a certificate proves its plan, decided without any solver.

The order of work: shapes, what belongs together, then each item by itself (names, limits, balance,
prices), and at last the documents as a whole. What a step needs is not looked at where an earlier
one failed: nothing would follow from it.
"""

from collections.abc import Mapping, Sequence
from fractions import Fraction
from typing import Any

import numpy as np

from service.network.canonical import canonical_json, digest, network_digest
from service.network.columns import Network
from service.network.options import Options
from service.proof.arcs import ItemArcs
from service.proof.bounds import check_bounds
from service.proof.calendar import Calendar, calendar_of
from service.proof.certificate import certificate_shape, plan_shape
from service.proof.consignments import check_consignments
from service.proof.coupled_bounds import Circle
from service.proof.cuts import check_cuts
from service.proof.dated_arcs import arcs_of
from service.proof.exact import Whole
from service.proof.feasibility import check_feasibility
from service.proof.flows import Names, PlanLine, item_flows
from service.proof.heads import check_heads, check_rules_listed
from service.proof.money import check_costs_known
from service.proof.order_lines import check_order_lines
from service.proof.plan_lines import check_plan_lines
from service.proof.results import ItemResult, item_result
from service.proof.rulings import Rulings, UnusableNetworkError, check_limits_are_clear
from service.proof.shapes import amount
from service.proof.shared_limits import SharedLimits, shares_limits
from service.proof.slackness import check_slackness
from service.proof.stated import check_stated
from service.proof.tariff_lanes import freights_of, on_days
from service.proof.totals import (
    check_shortages,
    check_site_limits,
    check_site_use,
    check_totals,
)
from service.proof.usable import usable_lanes
from service.proof.violations import Findings, Violation

__all__ = ["Violation", "check", "check_documents"]


def check(
    network: Network, options: Options, plan: Mapping[str, Any], certificate: Mapping[str, Any]
) -> tuple[Violation, ...]:
    """Return everything that keeps ``certificate`` from proving ``plan``; empty means proved.

    ``network`` is in normal form; both documents are parsed JSON of whatever shape.
    """
    findings = Findings()
    check_documents(
        network,
        options,
        plan,
        certificate,
        digests=(network_digest(network), digest(canonical_json(options.to_document()))),
        findings=findings,
    )
    return findings.violations()


def check_documents(  # noqa: PLR0913 - what a proof is about comes in four documents
    network: Network,
    options: Options,
    plan: object,
    certificate: object,
    *,
    digests: tuple[str, str],
    findings: Findings,
) -> None:
    """Note everything that keeps ``certificate`` from proving ``plan``.

    ``digests`` are those of the network and of the options.
    """
    for code, wrong in (
        ("plan_malformed", plan_shape(plan)),
        ("certificate_malformed", certificate_shape(certificate)),
    ):
        if wrong is not None:
            findings.add(code, "the document does not have its shape", place=wrong)
    if findings or not isinstance(plan, dict) or not isinstance(certificate, dict):
        return
    check_heads(network, plan, certificate, digests=digests, findings=findings)
    rulings = Rulings.of(network)
    check_rules_listed(network, rulings, plan["rules_in_force"], findings)
    calendar = calendar_of(network)
    rulings = rulings.over(calendar.lane) if calendar.dated else rulings
    try:
        _check_limits_are_clear(network)
        calendar = on_days(calendar)
        freights = freights_of(calendar.network)
        if freights is not None:
            freights.check_usable()
    except UnusableNetworkError as error:
        findings.add("network_unusable", str(error))
        return
    if (plan["status"] == "no_plan") != (certificate["lexicographic"] == "no_plan"):
        findings.add("bound_wrong", "plan and certificate are about different answers")
    elif plan["status"] == "no_plan":
        check_cuts(options, rulings, certificate, names=Names(calendar), findings=findings)
    else:
        _check_planned(calendar, options, rulings, plan, certificate, findings=findings)


def _check_limits_are_clear(network: Network) -> None:
    """Raise where a limit on a lane that several items can use does not say per what."""
    lanes = network.lanes
    unclear = (lanes.item == -1) & (lanes.per.codes < 0)
    if not (unclear & (lanes.capacity.present | lanes.must_ship.present)).any():
        return
    users = np.zeros(len(lanes), dtype=np.int64)
    for item in range(len(network.items)):
        users[usable_lanes(network, item)] += 1
    check_limits_are_clear(lanes, users > 1)


def _check_planned(  # noqa: PLR0913 - see check_documents
    calendar: Calendar,
    options: Options,
    rulings: Rulings,
    plan: Mapping[str, Any],
    certificate: Mapping[str, Any],
    *,
    findings: Findings,
) -> None:
    """Note what is wrong with a plan that serves something."""
    network, names = calendar.network, Names(calendar)
    lines = names.plan_lines(plan["plan_lines"], findings)
    proofs = certificate["items"]
    if [proof["item"] for proof in proofs] != [item.id for item in network.items]:
        findings.add("name_unknown", "the items are not those of the network", place="/items")
        return
    if lines is None:
        return
    scale = amount(certificate["cost_scale"])
    if scale <= 0:
        findings.add("cost_scale_wrong", "the scale is not above 0", place="/cost_scale")
        return
    circles = _circles(calendar, certificate, findings)
    if circles is None:
        return
    coupled = {item for circle in circles for item in circle}
    sharing = bool(circles) or shares_limits(network, rulings)
    read: list[tuple[ItemArcs, Whole]] = []
    results = []
    by_item = _by_item(network, lines)
    for item, proof in enumerate(proofs):
        result = _check_item(
            options,
            rulings,
            by_item[item],
            proof,
            scale=None if item in coupled else scale,
            names=names,
            findings=findings,
        )
        if result is not None:
            results.append(result[2])
            # Most networks share nothing: their arcs need not all be held at once.
            read += [result[:2]] if sharing else []
    if len(results) < len(network.items):
        return
    shared = _shared(calendar, rulings, options, circles, read, results, names, findings)
    if shared is None:
        return
    _check_tables(calendar, options, results, shared, lines, plan, certificate, findings)


def _by_item(network: Network, lines: Sequence[PlanLine]) -> list[list[PlanLine]]:
    """Return the plan lines with a lane, by item."""
    by_item: list[list[PlanLine]] = [[] for _ in network.items]
    for line in lines:
        if line.row >= 0:
            by_item[line.item].append(line)
    return by_item


def _shared(  # noqa: PLR0913, PLR0917 - see check_documents
    calendar: Calendar,
    rulings: Rulings,
    options: Options,
    circles: Sequence[Sequence[int]],
    read: Sequence[tuple[ItemArcs, Whole]],
    results: Sequence[ItemResult],
    names: Names,
    findings: Findings,
) -> list[Circle] | None:
    """Note every limit that items break together; return the circles, None if they cannot be."""
    network = calendar.network
    if calendar.dated or network.head.get("tariffs"):
        # Here each limit is of one item: no circle is stated.
        check_site_limits(calendar, rulings, results, findings)
        return []
    if not read:
        return []
    limits = SharedLimits(network, rulings)
    try:
        limits.check(read, findings)
    except UnusableNetworkError as error:
        findings.add("network_unusable", str(error))
        return None
    found = []
    for circle in circles:
        others = [arcs for item, (arcs, _) in enumerate(read) if item not in circle]
        own = [read[item][0] for item in circle]
        made = Circle(network, own, others, limits=limits, names=names)
        made.achieves([results[item] for item in circle], shortages=options.shortages == "allow")
        found.append(made)
    return found


def _check_item(  # noqa: PLR0913 - see check_documents
    options: Options,
    rulings: Rulings,
    lines: Sequence[PlanLine],
    proof: Mapping[str, Any],
    *,
    scale: Fraction | None,
    names: Names,
    findings: Findings,
) -> tuple[ItemArcs, Whole, ItemResult] | None:
    """Note what is wrong with one item; return its flow and what that comes to, if it can be read.

    Without a ``scale`` the item is proved together with others.
    """
    network = names.calendar.network
    try:
        arcs = arcs_of(names.calendar, options, rulings, names.items[proof["item"]])
        check_costs_known(network, arcs.item, arcs.rows)
    except UnusableNetworkError as error:
        findings.add("network_unusable", str(error), place=proof["item"])
        return None
    flow = item_flows(arcs, lines, proof, names=names, findings=findings)
    if flow is None:
        return None
    check_feasibility(network, arcs, flow, findings)
    if scale is not None:
        check_slackness(network, arcs, flow, proof, scale=scale, names=names, findings=findings)
    return arcs, flow, item_result(network, arcs, flow)


def _circles(
    calendar: Calendar, certificate: Mapping[str, Any], findings: Findings
) -> list[list[int]] | None:
    """Return the items that are proved together; None if a certificate does not say them soundly.

    Which they are is its own choice: items that share no limit can be proved together, too.
    """
    network = calendar.network
    if certificate.get("coupled") and (calendar.dated or network.head.get("tariffs")):
        findings.add("bound_wrong", "with dates or tariffs all are proved alone", place="/coupled")
        return None
    at = {item.id: place for place, item in enumerate(network.items)}
    found: list[list[int]] = []
    seen: set[str] = set()
    for circle in certificate.get("coupled", ()):
        items = circle["items"]
        places = [at.get(item, -1) for item in items]
        if not places or min(places) < 0 or places != sorted(set(places)):
            findings.add("name_unknown", "no circle of items", place="/coupled")
            return None
        if seen & set(items):
            findings.add("listed_twice", "an item is in two circles", place="/coupled")
            return None
        seen |= set(items)
        found.append(places)
    return found


def _check_tables(  # noqa: PLR0913, PLR0917 - see check_documents
    calendar: Calendar,
    options: Options,
    results: Sequence[ItemResult],
    circles: Sequence[Circle],
    lines: Sequence[PlanLine],
    plan: Mapping[str, Any],
    certificate: Mapping[str, Any],
    findings: Findings,
) -> None:
    """Note what is wrong with totals, bounds and tables, whose items are all known."""
    allowed, network = options.shortages == "allow", calendar.network
    check_bounds(network, results, circles, plan, certificate, shortages=allowed, findings=findings)
    check_site_use(network, results, plan["site_use"], findings)
    check_totals(calendar, results, plan, findings)
    paths = check_order_lines(calendar, results, lines, plan["order_lines"], findings)
    if paths is None:
        return
    check_shortages(network, results, plan, findings)
    check_plan_lines(network, results, lines, paths, findings)
    check_stated(network, results, lines, plan, findings)
    check_consignments(calendar, results, lines, paths, plan["consignments"], findings=findings)
