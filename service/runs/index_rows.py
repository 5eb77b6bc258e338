"""The rows by which plans are searched, taken from a plan document."""

from collections.abc import Iterator, Mapping
from typing import Any

from service.runs.run import IndexRows


def index_rows(plan: Mapping[str, Any]) -> IndexRows:
    """Return the search rows of ``plan``, numbered in the order of the document."""
    return IndexRows(plan_lines=list(plan_line_rows(plan)), order_lines=list(order_line_rows(plan)))


def plan_line_rows(plan: Mapping[str, Any]) -> Iterator[dict[str, object]]:
    """Yield the search rows of plan lines."""
    for position, line in enumerate(plan["plan_lines"]):
        yield {
            "position": position,
            "lane": line["lane"],
            "origin": line["origin"],
            "destination": line["destination"],
            "item": line["item"],
            "quantity": line["quantity"],
        }


def order_line_rows(plan: Mapping[str, Any]) -> Iterator[dict[str, object]]:
    """Yield the search rows of order lines; an order line need not belong to an order."""
    for position, line in enumerate(plan["order_lines"]):
        yield {
            "position": position,
            "reference": line["reference"],
            "order": line.get("order"),
            "site": line["site"],
            "item": line["item"],
            "quantity": line["quantity"],
            "served": line["served"],
            "short": line["short"],
        }
