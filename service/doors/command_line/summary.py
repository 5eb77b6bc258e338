"""The summary of a plan for a person: sentences first, then whom to call, then what leaves.

Pure: plan document in, lines out. About thirty lines of at most a hundred columns; nothing is said
by colour, so paper, a log file and a screen reader get the same. Parts without content vanish.
"""

import textwrap
from collections.abc import Mapping, Sequence
from datetime import datetime
from fractions import Fraction
from itertools import groupby
from typing import Any

from service.doors.command_line.layout import (
    WIDTH,
    clipped,
    count_of,
    grouped,
    percent,
    table,
    to_digits,
)

# The plan document as parsed JSON: the one place where Any is what it is.
Document = Mapping[str, Any]

# With five parts at these sizes the whole stays near thirty lines.
SHORTAGES_SHOWN = 7
SITES_SHOWN = 7
RULES_SHOWN = 3
DOUBTS_SHOWN = 3
ITEMS_NAMED = 3
CAUSES_SHOWN = 10

_BECAUSE = {
    "no_lane": "no lane leads there",
    "closed": "only closed lanes lead there",
    "no_stock": "not enough stock",
    "lane_full": "the lanes there are full",
    "site_full": "a site on the way is full",
    "rule": "a rule stands in the way",
    "not_worth_it": "costs more than it is worth",
}


def summary_lines(plan: Document, *, run_number: str | None = None) -> list[str]:
    """Return the summary of ``plan`` as lines without line ends.

    ``run_number`` is that of a stored run; a plan that was made without a store has none.
    """
    lines = [clipped(_heading(plan, run_number)), ""]
    if plan["status"] == "no_plan":
        lines += _no_plan(plan)
    else:
        lines += _sentences(plan)
        lines += _who_to_call(plan)
        lines += _what_leaves(plan)
    lines += _rules(plan)
    lines += _doubts(plan)
    lines += _evidence(plan)
    return lines


def _heading(plan: Document, run_number: str | None) -> str:
    """Return what this is: name, cut-off in words, run."""
    moment = datetime.fromisoformat(plan["cut_off"])
    days = ("Mon", "Tue", "Wed", "Thu", "Fri", "Sat", "Sun")
    months = ["Jan", "Feb", "Mar", "Apr", "May", "Jun", "Jul", "Aug", "Sep", "Oct", "Nov", "Dec"]
    # strftime would speak the language of the machine; a summary reads the same on all of them.
    day = f"{days[moment.weekday()]} {moment.day} {months[moment.month - 1]} {moment.year}"
    zone = moment.strftime("%z")
    parts = [
        plan["name"],
        f"cut-off {day} {moment:%H:%M} {zone[:3]}:{zone[3:]}",
        None if run_number is None else f"run {run_number}",
    ]
    return " · ".join(part for part in parts if part)


def _sentences(plan: Document) -> list[str]:
    """Return how much goes, what it costs and how sure that is."""
    return [
        *_paragraph(_lines_sentence(plan["totals"])),
        *_paragraph(_quantities_sentence(plan["totals"]["quantities"])),
        *_paragraph(_cost_sentence(plan)),
        *_paragraph(_proof_sentence(plan)),
    ]


def _lines_sentence(totals: Document) -> str:
    """Return how many order lines go, and how."""
    complete, in_part, none = (
        totals[key] for key in ("lines_complete", "lines_in_part", "lines_none")
    )
    every = complete + in_part + none
    if every == 0:
        return "No order lines were asked for."
    if complete == every:
        return f"{count_of(every, 'order line')}. Every line goes complete."
    parts = [f"{grouped(complete)} go complete" if complete else "none goes complete"]
    if in_part:
        parts.append(f"{grouped(in_part)} in part")
    if none:
        parts.append(f"{grouped(none)} not at all")
    return f"{count_of(every, 'order line')}: {', '.join(parts)}."


def _quantities_sentence(quantities: Sequence[Document]) -> str:
    """Return served and wanted of the items that are short, most short first."""
    short = [entry for entry in quantities if Fraction(entry["short"]) > 0]
    if not short:
        return ""
    short.sort(key=lambda entry: (-_fraction_short(entry), entry["item"]))
    told = [
        f"{entry['item']} {grouped(entry['served'])} of {grouped(entry['wanted'])} {entry['unit']}"
        f" ({percent(Fraction(entry['served']), Fraction(entry['wanted']))})"
        for entry in short[:ITEMS_NAMED]
    ]
    more = len(short) - len(told)
    full = len(quantities) - len(short)
    if more:
        told.append(f"{count_of(more, 'more item')} in part")
    if full:
        told.append(f"{count_of(full, 'other item')} in full")
    return f"Served: {'; '.join(told)}."


def _fraction_short(entry: Document) -> Fraction:
    """Return which part of what was wanted of an item is short."""
    return Fraction(entry["short"]) / Fraction(entry["wanted"])


def _cost_sentence(plan: Document) -> str:
    """Return what the plan costs, part by part."""
    digits = _money_digits(plan)
    parts = [
        f"{name} {to_digits(amount, digits)}"
        for name, amount in plan["cost_parts"].items()
        if Fraction(amount) != 0
    ]
    total = f"It costs {to_digits(plan['total_cost_rounded'], digits)} {plan['currency']}"
    return f"{total}: {', '.join(parts)}." if len(parts) > 1 else f"{total}."


def _proof_sentence(plan: Document) -> str:
    """Return what the certificate proves, or by how much the plan may be beaten."""
    certificate = plan["certificate"]
    if certificate["lexicographic"] == "proved" and Fraction(certificate["gap"]) == 0:
        if plan["shortages"]:
            return (
                "Proved: no plan is short of less, priority by priority,"
                " nor serves the same for less money."
            )
        return "Proved: no plan serves the same for less money."
    return (
        f"Not proved to be the best: no plan costs less than"
        f" {to_digits(certificate['lower_bound'], _money_digits(plan))} {plan['currency']}."
    )


def _who_to_call(plan: Document) -> list[str]:
    """Return the shortages, most urgent and largest first."""
    shortages = sorted(
        plan["shortages"],
        key=lambda row: (row["priority"] or 10, -Fraction(row["quantity"]), row["reference"] or ""),
    )
    if not shortages:
        return []
    wanted = {row["reference"]: row["quantity"] for row in plan["order_lines"]}
    rows = [
        (
            grouped(row["quantity"]),
            grouped(wanted[row["reference"]]) if row["reference"] is not None else "",
            row["item"],
            row["site"],
            row["reference"] if row["reference"] is not None else "stock to keep",
            str(row["priority"] or "-"),
            _because(row),
        )
        for row in shortages[:SHORTAGES_SHOWN]
    ]
    header = ("short", "of", "item", "ship-to", "order line", "pr", "because")
    more = len(shortages) - len(rows)
    return [
        "",
        f"WHO TO CALL   {count_of(len(shortages), 'shortage')}{_served_priorities(plan)}",
        *table(header, rows, right=(0, 1, 5)),
        *([f"  and {grouped(more)} more: --csv shortages lists all"] if more else []),
    ]


def _served_priorities(plan: Document) -> str:
    """Return which of the first priorities are served in full, or nothing."""
    present = sorted({row["priority"] for row in plan["order_lines"] if row["priority"]})
    short = {row["priority"] for row in plan["shortages"] if row["priority"]}
    complete = [
        str(priority)
        for priority in present
        if priority < min(short, default=10)  # the first that is short ends the list
    ]
    if not complete:
        return ""
    if len(complete) == 1:
        return f"; priority {complete[0]} is complete"
    return f"; priorities {', '.join(complete[:-1])} and {complete[-1]} are complete"


def _because(row: Document) -> str:
    """Return why a shortage is there, in words."""
    by = row.get("outranked_by")
    if row["reason"] == "outranked" and by is not None:
        rank = f", pr {by['priority']}" if by["priority"] else ""
        lines = count_of(by["lines"], "line")
        return f"outranked by {lines}, most by {by['reference']}{rank}"
    return _BECAUSE.get(row["reason"], str(row["reason"]).replace("_", " "))


def _what_leaves(plan: Document) -> list[str]:
    """Return what leaves each site, the heaviest first."""
    consignments = sorted(plan["consignments"], key=lambda row: str(row["origin"]))
    sites = []
    for site, group in groupby(consignments, key=lambda row: str(row["origin"])):
        own = list(group)
        pallets, weight = _sum(own, "pallets"), _sum(own, "weight_kg")
        cost = _sum(own, "cost")
        sites.append((weight or Fraction(0), site, len(own), pallets, weight, cost))
    if not sites:
        return []
    sites.sort(key=lambda entry: (-entry[0], entry[1]))
    digits = _money_digits(plan)
    rows = [
        (
            site,
            grouped(number),
            "unknown" if pallets is None else to_digits(pallets, 1),
            "unknown" if weight is None else to_digits(weight / 1000, 1),
            "unknown" if cost is None else to_digits(cost, digits),
        )
        for _, site, number, pallets, weight, cost in sites[:SITES_SHOWN]
    ]
    header = ("from", "consignments", "pallets", "tonnes", f"transport {plan['currency']}")
    more = len(sites) - len(rows)
    return [
        "",
        "WHAT LEAVES",
        *table(header, rows, right=(1, 2, 3, 4)),
        *([f"  and {count_of(more, 'more site')}: --csv consignments lists all"] if more else []),
    ]


def _sum(rows: Sequence[Document], column: str) -> Fraction | None:
    """Return the exact sum of a column, or None where a row does not know its value."""
    values = [row[column] for row in rows]
    if any(value in {None, "unknown"} for value in values):
        return None
    return sum((Fraction(value) for value in values), Fraction(0))


def _rules(plan: Document) -> list[str]:
    """Return the rules that shaped the plan, binding ones first."""
    rules = sorted(plan["rules_in_force"], key=lambda rule: (not rule["binding"], rule["id"]))
    if not rules:
        return []
    lines = ["", f"RULES   {count_of(len(rules), 'rule')}"]
    for rule in rules[:RULES_SHOWN]:
        effect = "binds" if rule["binding"] else "does not bind"
        if not rule["applied"]:
            effect = "not applied today"
        note = f": {rule['note']}" if rule.get("note") else ""
        owner = f" ({rule['owner']})" if rule.get("owner") else ""
        lines.append(clipped(f"  {rule['id']} ({rule['rule']}) {effect}{note}{owner}"))
    more = len(rules) - RULES_SHOWN
    return lines + ([f"  and {grouped(more)} more"] if more > 0 else [])


def _doubts(plan: Document) -> list[str]:
    """Return what the reader should not take for granted."""
    doubts = [
        f"{warning['detail']} ({count_of(warning['count'], 'case')})"
        for warning in plan["warnings"]
    ]
    aside = len(plan["set_aside"])
    if aside:
        doubts.insert(0, f"{count_of(aside, 'order line')} could not be read and went aside")
    if not doubts:
        return []
    more = len(doubts) - DOUBTS_SHOWN
    return [
        "",
        "DOUBTS",
        *(clipped(f"  {doubt}") for doubt in doubts[:DOUBTS_SHOWN]),
        *([f"  and {grouped(more)} more: --json lists all"] if more > 0 else []),
    ]


def _evidence(plan: Document) -> list[str]:
    """Return by what the network is known for good."""
    return ["", clipped(f"EVIDENCE   network {plan['network_digest']}")]


def _no_plan(plan: Document) -> list[str]:
    """Return why no plan can exist."""
    reason = plan["reason"]
    lines = _paragraph(f"There is no plan. {reason['detail']}")
    items = reason["items"]
    for entry in items[:CAUSES_SHOWN]:
        lines += textwrap.wrap(
            f"{entry['item']}: {entry['detail']}",
            WIDTH,
            initial_indent="  ",
            subsequent_indent="    ",
        )
    more = len(items) - CAUSES_SHOWN
    return lines + ([f"  and {count_of(more, 'more item')}: --json lists all"] if more > 0 else [])


def _money_digits(plan: Document) -> int:
    """Return how many decimals the currency has, which the rounded total shows."""
    return len(str(plan["total_cost_rounded"]).partition(".")[2])


def _paragraph(text: str) -> list[str]:
    """Return ``text`` as lines; nothing for nothing."""
    return textwrap.wrap(text, WIDTH)
