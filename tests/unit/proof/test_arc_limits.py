"""Limits, importance and rounding in the formal network, each derived by hand."""

from fractions import Fraction
from typing import Any

import pytest

from service.network.options import Options
from service.proof.arcs import item_arcs
from service.proof.rulings import Rulings, UnusableNetworkError
from tests.unit.proof.by_hand import network_from
from tests.unit.proof.formal import Written, arcs_of, body, text, written


@pytest.mark.parametrize(
    ("flow", "expected"),
    [
        ("through", {("handle", "X in", "X out", 0, 2, Fraction(1, 4))}),
        (
            "received",
            {
                ("lane", "D out", "X received", 0, -1, Fraction(1)),
                ("enter", "X received", "X in", 0, 2, Fraction(0)),
            },
        ),
        (
            "sent",
            {
                ("leave", "X out", "X sent", 0, 2, Fraction(0)),
                ("lane", "X sent", "Y in", 0, -1, Fraction(2)),
            },
        ),
    ],
)
def test_throughput_limits_are_steps_rounded_down(flow: str, expected: set[Written]) -> None:
    """At most 74 kg of sacks of 25 kg are 2 sacks; the rule of 90 kg on the same site is weaker."""
    rules = [
        {
            "rule": "throughput",
            "id": name,
            "sites": {"ids": ["X"]},
            "flow": flow,
            "measure": "weight_kg",
            "maximum": maximum,
        }
        for name, maximum in (("a", "90"), ("b", "74"))
    ]

    assert expected <= written(network_from(body(rules=rules)))


def test_closed_site_passes_nothing() -> None:
    """Its lanes are shut, and so is the way through it, for the days of the rule only."""
    rule = {"rule": "closure", "id": "a", "sites": {"ids": ["X"]}, "until": "2026-02-03"}
    shut = written(network_from(body(rules=[rule])))
    over = written(network_from(body(rules=[rule | {"until": "2026-02-02"}])))

    assert {
        text("lane", "D out", "X in", 0, 0, 1),
        text("lane", "X out", "Y in", 0, 0, 2),
        text("handle", "X in", "X out", 0, 0, "0.25"),
    } <= shut
    assert over == written(network_from(body()))


def test_limits_of_lanes_are_turned_into_steps() -> None:
    """1.5 pallets of 48 are 72 sacks; a pallet costs 96, so a sack 2; 48 sacks must go."""
    lane = {
        "origin": "X",
        "destination": "Y",
        "measure": "pallet",
        "unit_cost": "96",
        "capacity": "1.501",
        "must_ship": "1",
    }
    tables = body()

    arcs = written(network_from(body(lanes=[tables["lanes"][0], lane])))

    assert text("lane", "X out", "Y in", 48, 72, 2) in arcs


def test_fixed_quantity_is_least_and_most_and_gives_way_to_a_closure() -> None:
    """A closed lane carries nothing, whatever was fixed there."""
    fixed = {"rule": "fixed_quantity", "id": "a", "lanes": {"origin": ["X"]}, "quantity": "4"}
    shut = {"rule": "closure", "id": "b", "lanes": {"destination": ["Y"]}}

    assert text("lane", "X out", "Y in", 4, 4, 2) in written(network_from(body(rules=[fixed])))
    assert text("lane", "X out", "Y in", 0, 0, 2) in written(
        network_from(body(rules=[fixed, shut]))
    )


def test_lines_alike_are_one_group_under_the_first_reference() -> None:
    """Two lines of priority 2 want together; one in money is apart; one of nothing is in none."""
    tables = body()
    tables["demand"] += [
        {"reference": "0", "site": "Y", "item": "SALT", "quantity": "3", "priority": 2},
        {"reference": "M", "site": "Y", "item": "SALT", "quantity": "1", "shortage_cost": "8"},
        {"reference": "Z", "site": "Y", "item": "SALT", "quantity": "0", "priority": 9},
    ]

    arcs = written(network_from(tables))

    assert text("want", "Y demand 0", "root", 10, 10) in arcs
    assert text("short", "root", "Y demand M", 0, -1, 8) in arcs
    assert not any("Z" in arc[1] for arc in arcs)
    assert arcs_of(network_from(tables)).priorities == (2, 4)


def test_option_gives_money_to_lines_that_name_nothing() -> None:
    """A priority that is stated stays one; the default of 5 gives way to what a sack is worth."""
    tables = body()
    del tables["demand"][1]["priority"]
    options = Options(worth_at_most=Fraction(6))

    arcs = written(network_from(tables), options)

    assert text("short", "root", "X demand B", 0, -1, 6) in arcs
    assert text("short 1", "root", "Y demand A") in arcs


@pytest.mark.parametrize(("rounding", "steps"), [("up", 8), ("down", 7)])
def test_order_lines_are_rounded_as_the_options_say(rounding: Any, steps: int) -> None:  # noqa: ANN401 - a literal
    """7.5 sacks are 8 or 7; refused, the network cannot be planned."""
    tables = body()
    tables["demand"][0]["quantity"] = "7.5"
    network = network_from(tables, Options(demand_rounding=rounding))

    assert text("want", "Y demand A", "root", steps, steps) in written(
        network, Options(demand_rounding=rounding)
    )
    with pytest.raises(UnusableNetworkError, match="off the step"):
        arcs_of(network)


def test_lane_of_any_item_is_used_where_stock_can_come_and_is_wanted() -> None:
    """The second item has stock at Z, which no lane leaves, and nobody wants it: it uses none."""
    tables = body()
    tables["items"] = [*tables["items"], {"id": "SAND", "unit": "sack"}]
    tables["sites"] = [*tables["sites"], {"id": "Z", "roles": ["warehouse"]}]
    tables["supply"] = [*tables["supply"], {"site": "Z", "item": "SAND", "quantity": "5"}]
    network = network_from(tables)
    items = {item.id: place for place, item in enumerate(network.items)}

    used = {
        name: item_arcs(network, Options(), Rulings.of(network), place).rows.tolist()
        for name, place in items.items()
    }

    assert used == {"SALT": [0, 1], "SAND": []}
