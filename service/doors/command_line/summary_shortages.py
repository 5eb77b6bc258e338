"""The part of the summary that says whom to call: what is short, and why."""

from fractions import Fraction

from service.doors.command_line.layout import Document, count_of, grouped, table

SHORTAGES_SHOWN = 7

_BECAUSE = {
    "no_lane": "no lane leads there",
    "closed": "only closed lanes lead there",
    "too_late": "nothing arrives within its dates",
    "no_stock": "not enough stock",
    "lane_full": "the lanes there are full",
    "site_full": "a site on the way is full",
    "rule": "a rule stands in the way",
    "not_worth_it": "costs more than it is worth",
}


def who_to_call(plan: Document) -> list[str]:
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
