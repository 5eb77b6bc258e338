"""The summary of a plan for a person: sentences first, then whom to call, then what leaves.

Pure: plan document in, lines out. About thirty lines of at most a hundred columns; nothing is said
by colour, so paper, a log file and a screen reader get the same. Parts without content vanish.
"""

import textwrap
from collections.abc import Sequence
from datetime import datetime
from fractions import Fraction

from service.doors.command_line.layout import (
    WIDTH,
    Document,
    clipped,
    count_of,
    grouped,
    money_digits,
    percent,
    to_digits,
)
from service.doors.command_line.summary_leaving import what_leaves
from service.doors.command_line.summary_shortages import who_to_call

# With seven shortages and seven sites beside these the whole stays near thirty lines.

RULES_SHOWN = 3
DOUBTS_SHOWN = 3
ITEMS_NAMED = 3
CAUSES_SHOWN = 10


def summary_lines(plan: Document, *, run_number: str | None = None) -> list[str]:
    """Return the summary of ``plan`` as lines without line ends.

    ``run_number`` is that of a stored run; a plan that was made without a store has none.
    """
    lines = [clipped(_heading(plan, run_number)), ""]
    if plan["status"] == "no_plan":
        lines += _no_plan(plan)
    else:
        lines += _sentences(plan)
        lines += who_to_call(plan)
        lines += what_leaves(plan)
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
    late = totals.get("lines_late", 0)
    behind = f" {grouped(late)} late." if late else ""
    if complete == every:
        return f"{count_of(every, 'order line')}. Every line goes complete.{behind}"
    parts = [f"{grouped(complete)} go complete" if complete else "none goes complete"]
    if in_part:
        parts.append(f"{grouped(in_part)} in part")
    if none:
        parts.append(f"{grouped(none)} not at all")
    return f"{count_of(every, 'order line')}: {', '.join(parts)}.{behind}"


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
    digits = money_digits(plan)
    parts = [
        f"{name} {to_digits(amount, digits)}"
        for name, amount in plan["cost_parts"].items()
        if Fraction(amount) != 0
    ]
    total = f"It costs {to_digits(plan['total_cost_rounded'], digits)} {plan['currency']}"
    return f"{total}: {', '.join(parts)}." if parts else f"{total}."


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
        f" {to_digits(certificate['lower_bound'], money_digits(plan))} {plan['currency']}."
    )


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


def _paragraph(text: str) -> list[str]:
    """Return ``text`` as lines; nothing for nothing."""
    return textwrap.wrap(text, WIDTH)
