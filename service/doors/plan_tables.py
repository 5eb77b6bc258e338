"""The tables of a plan document as CSV (RFC 4180), for every door that hands them out.

A cell that holds more than one thing (sources, order references, tags) holds it as compact JSON, so
that nothing is lost and a row stays a row; an absent value is an empty cell. A text that a
spreadsheet would run as a formula gets an apostrophe in front, which spreadsheets do not show.
"""

import csv
import io
import re
from collections.abc import Mapping, Sequence
from typing import Final

import orjson

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
}


def table_csv(plan: Mapping[str, object], table: str) -> bytes:
    """Return one table of ``plan`` as CSV in UTF-8, with its header also where it has no rows.

    ``table`` is a key of ``COLUMNS``; anything else is a ``KeyError``, which a door must have
    answered before it comes here.
    """
    columns = COLUMNS[table]
    rows = plan[table]
    assert isinstance(rows, Sequence)  # noqa: S101 - the plan document is our own
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
    if value.startswith(_RUN_BY_SPREADSHEETS) and not _NUMBER.fullmatch(value):
        return f"'{value}"
    return value
