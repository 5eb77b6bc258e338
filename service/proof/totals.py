"""Sums over a whole plan: money, lines, quantities, the use of stock, and limits over items."""

import re
from collections.abc import Mapping, Sequence
from fractions import Fraction
from typing import Any

from service.network.columns import Network
from service.network.currencies import minor_units
from service.network.rules import Throughput
from service.proof.calendar import Calendar
from service.proof.results import ItemResult
from service.proof.rulings import Ruling, Rulings, measure_of
from service.proof.shapes import amount
from service.proof.violations import Findings

_ROUNDED = re.compile(r"-?(?:0|[1-9][0-9]*)(?:\.([0-9]+))?")


def check_totals(
    calendar: Calendar,
    results: Sequence[ItemResult],
    plan: Mapping[str, Any],
    findings: Findings,
) -> None:
    """Note totals of money, order lines and quantities that do not follow from the flow."""
    parts = dict.fromkeys(plan["cost_parts"], Fraction(0))
    for result in results:
        for part, money in result.money.items():
            parts[part] += money
    for part, money in parts.items():
        if amount(plan["cost_parts"][part]) != money:
            findings.add("total_wrong", f"{part} is not the sum", place=f"/cost_parts/{part}")
    total = sum(parts.values(), Fraction(0))
    if amount(plan["total_cost"]) != total:
        findings.add("total_wrong", "not the sum of its parts", place="/total_cost")
    rounded = plan["total_cost_rounded"]
    if not is_rounded(rounded, total, decimals=minor_units(plan["currency"])):
        findings.add("total_wrong", "not the total, rounded", place="/total_cost_rounded")
    if amount(plan["rounding_difference"]) != amount(rounded) - total:
        findings.add("total_wrong", "not the difference", place="/rounding_difference")
    _check_line_counts(plan, findings, dated=calendar.dated)
    _check_quantities(calendar.network, results, plan["totals"]["quantities"], findings)


def is_rounded(text: str, total: Fraction, *, decimals: int | None) -> bool:
    """Return whether ``text`` is ``total`` at ``decimals``, half away from zero.

    Nothing can be planned in a currency without a smallest unit (``decimals`` is None).
    """
    match = _ROUNDED.fullmatch(text)
    if match is None or decimals is None:
        return False
    units = 10**decimals
    doubled = abs(total) * units * 2 + 1
    rounded = Fraction(doubled.numerator // (2 * doubled.denominator), units)
    written = len(match[1] or "") == decimals
    return written and amount(text) == (rounded if total >= 0 else -rounded)


def _check_line_counts(plan: Mapping[str, Any], findings: Findings, *, dated: bool) -> None:
    """Note a wrong number of order lines that go complete, in part, not at all, or set aside."""
    complete = none = 0
    for line in plan["order_lines"]:
        if amount(line["short"]) == 0:
            complete += 1
        elif amount(line["served"]) == 0:
            none += 1
    expected = {
        "lines_complete": complete,
        "lines_in_part": len(plan["order_lines"]) - complete - none,
        "lines_none": none,
        "set_aside": len(plan["set_aside"]),
    }
    if dated and plan["order_lines"]:
        expected["lines_late"] = sum(line.get("days_late", 0) > 0 for line in plan["order_lines"])
    totals = plan["totals"]
    if {key: totals[key] for key in totals if key != "quantities"} != expected:
        findings.add("total_wrong", "not the number of order lines", place="/totals")


def _check_quantities(
    network: Network,
    results: Sequence[ItemResult],
    listed: Sequence[Mapping[str, Any]],
    findings: Findings,
) -> None:
    """Note what is wanted, served and short of each item, and weighs, if it is not the flow's."""
    expected: list[tuple[object, ...]] = []
    for result in results:
        item = network.items[result.item]
        wanted = sum(line.wanted for line in result.wanted.lines) * result.step
        served = sum(result.served.values()) * result.step
        weight = None if item.weight_kg is None else served * item.weight_kg
        if wanted:
            expected.append((item.id, item.unit, wanted, served, wanted - served, weight))
    stated: list[tuple[object, ...]] = [
        (
            entry["item"],
            entry["unit"],
            *(amount(entry[key]) for key in ("wanted", "served", "short")),
            None if entry["weight_kg"] == "unknown" else amount(entry["weight_kg"]),
        )
        for entry in listed
    ]
    if stated != expected:
        findings.add("total_wrong", "not the quantities of the plan", place="/totals/quantities")


def check_site_use(
    network: Network,
    results: Sequence[ItemResult],
    listed: Sequence[Mapping[str, Any]],
    findings: Findings,
) -> None:
    """Note when the use of stock is not what the flow draws and keeps."""
    expected: list[tuple[int, int, tuple[Fraction, ...]]] = []
    for result in results:
        for site, held in result.stock.items():
            available = sum(held.tier_steps)
            if not available:
                continue
            tiers = range(1, len(held.tier_steps) + 1)
            shipped = sum(result.drawn.get((site, tier), 0) for tier in tiers)
            kept = result.kept.get(site, 0)
            numbers = (available, shipped, kept, available - shipped - kept)
            exact = tuple(result.step * number for number in numbers)
            expected.append((site, result.item, exact))
    named = [
        (network.sites[site].id, network.items[item].id, *exact)
        for site, item, exact in sorted(expected)
    ]
    fields = ("available", "shipped", "kept", "left")
    stated = [
        (entry["site"], entry["item"], *(amount(entry[field]) for field in fields))
        for entry in listed
    ]
    if stated != named:
        findings.add("site_use_wrong", "not what the flow draws and keeps", place="/site_use")


def check_shortages(
    network: Network,
    results: Sequence[ItemResult],
    plan: Mapping[str, Any],
    findings: Findings,
) -> None:
    """Note when the shortages are not those of the order lines, and then those of kept stock."""
    expected: list[tuple[object, ...]] = [
        (line["reference"], line["site"], line["item"], line["priority"], amount(line["short"]))
        for line in plan["order_lines"]
        if amount(line["short"]) > 0
    ]
    kept = [
        (site, result.item, result.stock[site].keep_priority, steps * result.step)
        for result in results
        for site, steps in result.keep_short.items()
    ]
    expected += [
        (None, network.sites[site].id, network.items[item].id, priority, quantity)
        for site, item, priority, quantity in sorted(kept)
    ]
    fields = ("reference", "site", "item", "priority")
    listed = plan["shortages"]
    stated = [(*(entry[field] for field in fields), amount(entry["quantity"])) for entry in listed]
    if stated != expected:
        findings.add("shortage_wrong", "not what order lines are short of", place="/shortages")
    if any(("kept" in entry) != (entry["reference"] is None) for entry in listed):
        findings.add("shortage_wrong", "kept is for stock that stays", place="/shortages")


def check_site_limits(
    calendar: Calendar, rulings: Rulings, results: Sequence[ItemResult], findings: Findings
) -> None:
    """Note every throughput limit that the items of a rule break together.

    Each item alone was bounded by the limit; where more than one passes, their sum must be too.
    A plan that is optimal under the weaker limits and respects the stronger one is optimal.
    """
    network = calendar.network
    for ruling in rulings.rulings:
        if not isinstance(ruling.rule, Throughput):
            continue
        passed: dict[tuple[int, object], Fraction] = {}
        for result in results:
            if not ruling.items[result.item]:
                continue
            for spot, steps in _passing(calendar, ruling, result).items():
                per = measure_of(network.items[result.item], ruling.rule.measure) * result.step
                passed[spot] = passed.get(spot, Fraction(0)) + steps * per
        for (site, _), quantity in passed.items():
            if ruling.sites[site] and quantity > ruling.rule.maximum:
                place = f"{ruling.rule.id}: {network.sites[site].id}"
                findings.add("limit_broken", "a throughput limit over items", place=place)


def _passing(
    calendar: Calendar, ruling: Ruling, result: ItemResult
) -> dict[tuple[int, object], int]:
    """Return by site and date what of an item counts towards a throughput limit, in steps."""
    lanes = calendar.network.lanes
    flow = ruling.rule.flow if isinstance(ruling.rule, Throughput) else ""
    passed: dict[tuple[int, object], int] = {}
    ends = lanes.origin if flow == "sent" else lanes.destination
    for row, steps in result.on_lane.items():
        site = int(ends[row])
        if ruling.sites[site]:
            date = calendar.dates(row)[flow != "sent"] if calendar.dated else None
            passed[(site, date)] = passed.get((site, date), 0) + steps
    if flow == "through":
        for (site, on), steps in result.drawn_on.items():
            if ruling.sites[site]:
                passed[(site, on)] = passed.get((site, on), 0) + steps
    return passed
