"""Paths are shared out to order lines: first come first, few splits, the last goes short."""

from typing import Any

from tests.factories import network_document, plan_network


def order_lines(stock: dict[str, str], demand: list[dict[str, Any]]) -> dict[str, dict[str, Any]]:
    """Plan lines at one ship-to that is served from several warehouses; return them by name."""
    planned = plan_network(
        network_document(
            sites=[
                *({"id": site, "roles": ["warehouse"]} for site in stock),
                {"id": "Y", "roles": ["ship_to"]},
            ],
            supply=[
                {"site": site, "item": "GOODS", "quantity": quantity}
                for site, quantity in stock.items()
            ],
            demand=[{"site": "Y", "item": "GOODS", **row} for row in demand],
            lanes=[{"origin": site, "destination": "Y", "unit_cost": "1"} for site in stock],
        )
    )
    return {line["reference"]: line for line in planned.plan["order_lines"]}


def served_from(line: dict[str, Any]) -> list[tuple[str, str]]:
    """Return (origin, quantity) of a line's sources."""
    return [(source["origin"], source["quantity"]) for source in line["sources"]]


def test_sources_and_lines_are_walked_side_by_side() -> None:
    """A has 5, B has 7; the lines want 3, 4 and 5: only the second is split."""
    lines = order_lines(
        {"A": "5", "B": "7"},
        [
            {"reference": "1", "quantity": "3"},
            {"reference": "2", "quantity": "4"},
            {"reference": "3", "quantity": "5"},
        ],
    )

    assert served_from(lines["1"]) == [("A", "3")]
    assert served_from(lines["2"]) == [("A", "2"), ("B", "2")]
    assert served_from(lines["3"]) == [("B", "5")]


def test_line_that_equals_what_is_left_of_a_source_takes_it_whole() -> None:
    """A has 5 and B has 7, as the two lines want; none is split."""
    lines = order_lines(
        {"A": "5", "B": "7"},
        [{"reference": "1", "quantity": "5"}, {"reference": "2", "quantity": "7"}],
    )

    assert served_from(lines["1"]) == [("A", "5")]
    assert served_from(lines["2"]) == [("B", "7")]


def test_shortage_falls_on_who_ordered_last() -> None:
    """Times are compared as instants: 10:30 at +02:00 is before 09:00 UTC; untimed lines last."""
    lines = order_lines(
        {"A": "5"},
        [
            {"reference": "1", "quantity": "2"},
            {"reference": "2", "quantity": "2", "ordered_at": "2026-02-01T09:00:00Z"},
            {"reference": "3", "quantity": "2", "ordered_at": "2026-02-01T10:30:00+02:00"},
        ],
    )

    assert {name: line["short"] for name, line in lines.items()} == {"1": "1", "2": "0", "3": "0"}


def test_lines_without_stock_have_no_sources() -> None:
    """Nothing is there: every line is listed, short by all it wants."""
    lines = order_lines({"A": "0"}, [{"reference": "1", "quantity": "2"}])

    assert (lines["1"]["short"], lines["1"]["sources"]) == ("2", [])


def test_only_named_origins_serve_a_line() -> None:
    """A is nearer for nobody here, but the line that may only have B's goods gets them."""
    lines = order_lines(
        {"A": "5", "B": "2"},
        [
            {"reference": "1", "quantity": "2", "priority": 3},
            {"reference": "2", "quantity": "2", "priority": 4, "origins": ["B"]},
        ],
    )

    assert served_from(lines["1"]) == [("A", "2")]
    assert served_from(lines["2"]) == [("B", "2")]
