"""The tables of a plan document, for every door that hands them out; here also as CSV (RFC 4180).

What a receiver can count after, to see that nothing was lost on the way, is a table of its own:
``totals``, with the number of rows of each other table and the sums of its columns.

A cell that holds more than one thing (sources, order references, tags) holds it as compact JSON, so
that nothing is lost and a row stays a row; an absent value is an empty cell. A text that a
spreadsheet would run as a formula gets an apostrophe in front, which spreadsheets do not show.
"""

import csv
import io
import re
from collections.abc import Iterable, Iterator, Mapping, Sequence
from fractions import Fraction
from typing import Any, Final

import orjson

from service.network.quantities import exact_text, parse_exact

COLUMNS: Mapping[str, tuple[str, ...]] = {
    "plan_lines": (
        "lane",
        "origin",
        "destination",
        "item",
        "quantity",
        "unit_cost",
        "transport_cost",
        "supply_cost",
        "handling_cost",
        "charges",
        "cost",
        "stated",
        "charge_parts",
        "departs",
        "arrives",
    ),
    "order_lines": (
        "reference",
        "order",
        "site",
        "item",
        "quantity",
        "ordered",
        "served",
        "short",
        "priority",
        "shortage_cost",
        "sources",
        "tags",
        "extra",
        "earliest",
        "due",
        "latest",
        "days_late",
    ),
    "consignments": (
        "lane",
        "carrier",
        "origin",
        "destination",
        "pallets",
        "weight_kg",
        "volume_m3",
        "cost",
        "order_references",
        "freight",
        "departs",
        "arrives",
    ),
    "shortages": (
        "reference",
        "site",
        "item",
        "priority",
        "quantity",
        "reason",
        "next_chance",
        "outranked_by",
        "kept",
    ),
    "site_use": ("site", "item", "available", "shipped", "kept", "left"),
    "currencies": (
        "currency",
        "rate",
        "per",
        "as_of",
        "source",
        "supply",
        "transport",
        "charges",
        "amount",
        "converted",
    ),
    "totals": ("table", "rows", "column", "total"),
}
# Columns of exact numbers as text. They add up over all rows but where a number belongs to a unit.
AMOUNTS: Mapping[str, tuple[str, ...]] = {
    "plan_lines": (
        "quantity",
        "unit_cost",
        "transport_cost",
        "supply_cost",
        "handling_cost",
        "charges",
        "cost",
    ),
    "order_lines": ("quantity", "ordered", "served", "short", "shortage_cost"),
    "consignments": ("pallets", "weight_kg", "volume_m3", "cost"),
    "shortages": ("quantity",),
    "site_use": ("available", "shipped", "kept", "left"),
    "currencies": ("rate", "per", "supply", "transport", "charges", "amount", "converted"),
    "totals": ("total",),
}
OPTIONAL: Final = frozenset({"currencies"})
# What is a whole number in JSON too; amounts are text there, and decimals in typed files.
WHOLE: Final = frozenset({"priority", "rows", "days_late"})
_NOT_ADDED: Final = frozenset(
    {"unit_cost", "ordered", "shortage_cost", "pallets", "weight_kg", "volume_m3"}
)


def table_rows(plan: Mapping[str, Any], table: str) -> Sequence[Mapping[str, Any]]:
    """Return the rows of one table of ``plan``, or of ``totals``; ``table`` is in ``COLUMNS``."""
    if table == "totals":
        return list(_totals(plan))
    # Only a plan with exchange rates has the table of currencies.
    rows: Sequence[Mapping[str, Any]] = plan.get(table, ()) if table in OPTIONAL else plan[table]
    return rows


def _totals(plan: Mapping[str, Any]) -> Iterator[Mapping[str, object]]:
    """Yield the number of rows of each table and the exact sum of each column that adds up.

    Quantities are added as they are written, over all items.
    """
    for table in COLUMNS:
        if table == "totals" or (table in OPTIONAL and table not in plan):
            continue
        rows = table_rows(plan, table)
        for column in AMOUNTS[table]:
            # Other currencies do not add up; what they come to in the plan's does.
            if column in _NOT_ADDED or (table == "currencies" and column != "converted"):
                continue
            total = exact_text(_sum(row.get(column) for row in rows))
            yield {"table": table, "rows": len(rows), "column": column, "total": total}


def _sum(amounts: Iterable[str | None]) -> Fraction:
    """Return the exact sum of what is there: whole numbers for each number of decimals.

    A fraction for each amount would take eight times as long.
    """
    by_decimals: dict[int, int] = {}
    total = Fraction(0)
    for amount in amounts:
        if amount is None:
            continue
        if "/" in amount:
            total += parse_exact(amount)
            continue
        whole, _, tail = amount.partition(".")
        by_decimals[len(tail)] = by_decimals.get(len(tail), 0) + int(whole + tail)
    return total + sum(
        (Fraction(scaled, 10**decimals) for decimals, scaled in by_decimals.items()), Fraction(0)
    )


def table_csv(plan: Mapping[str, Any], table: str) -> bytes:
    """Return one table of ``plan`` as CSV in UTF-8, with its header also where it has no rows.

    ``table`` is a key of ``COLUMNS``; anything else is a ``KeyError``, which a door must have
    answered before it comes here.
    """
    columns = COLUMNS[table]
    rows = table_rows(plan, table)
    text = io.StringIO()
    writer = csv.writer(text)
    writer.writerow(columns)
    writer.writerows([_cell(row.get(column)) for column in columns] for row in rows)
    return text.getvalue().encode()


# Ids and references come from outside: "=..." in one must not run where the table is opened.
_RUN_BY_SPREADSHEETS: Final = ("=", "+", "-", "@", "\t", "\r", "\n", "＝", "＋", "－", "＠")  # noqa: RUF001 - the wide forms run too
_NUMBER: Final = re.compile(r"-?[0-9]+(\.[0-9]+)?(/[0-9]+)?")


def _cell(value: object) -> str:
    """Return a value as the text of a cell."""
    if value is None:
        return ""
    if not isinstance(value, str):
        return orjson.dumps(value).decode()
    return f"'{value}" if is_run(value) else value


def is_run(text: str) -> bool:
    """Return whether a spreadsheet would take ``text`` for a formula."""
    return text.startswith(_RUN_BY_SPREADSHEETS) and not _NUMBER.fullmatch(text)
