"""The tables of a plan add up to the last decimal; each number is derived by hand."""

from fractions import Fraction

import pytest

from service.planning.documents.plan import rounded_money
from tests.factories import network_document, plan_network

ROAD_SALT = {
    "id": "ROAD-25",
    "unit": "bag",
    "weight_kg": "25.2",
    "volume_m3": "0.021",
    "packs": [{"unit": "pallet", "contains": "40"}],
}


def test_one_lane_with_handling_adds_up() -> None:
    """880 bags: 880 x 0.215 = 189.20 on the lane, 880 x 0.04 = 35.20 in the depot; 22 pallets."""
    planned = plan_network(
        network_document(
            items=[ROAD_SALT],
            sites=[
                {"id": "DEPOT", "roles": ["warehouse"], "handling_cost": "0.04"},
                {"id": "YARD", "roles": ["ship_to"]},
            ],
            supply=[{"site": "DEPOT", "item": "ROAD-25", "quantity": "3200"}],
            demand=[
                {"reference": "SO/1", "site": "YARD", "item": "ROAD-25", "quantity": "880"},
            ],
            lanes=[{"id": "L1", "origin": "DEPOT", "destination": "YARD", "unit_cost": "0.215"}],
        )
    ).plan

    assert planned["total_cost"] == "224.4"
    assert planned["total_cost_rounded"] == "224.40"
    assert planned["plan_lines"] == [
        {
            "lane": "L1",
            "origin": "DEPOT",
            "destination": "YARD",
            "item": "ROAD-25",
            "quantity": "880",
            "unit_cost": "0.215",
            "transport_cost": "189.2",
            "supply_cost": "0",
            "handling_cost": "35.2",
            "charges": "0",
            "cost": "224.4",
        }
    ]
    (consignment,) = planned["consignments"]
    assert consignment["pallets"] == "22"
    assert consignment["weight_kg"] == "22176"
    assert consignment["volume_m3"] == "18.48"
    assert consignment["order_references"] == ["SO/1"]
    assert planned["site_use"] == [
        {
            "site": "DEPOT",
            "item": "ROAD-25",
            "available": "3200",
            "shipped": "880",
            "kept": "0",
            "left": "2320",
        }
    ]


def test_costs_follow_the_goods_over_a_cross_dock_and_at_home() -> None:
    """W draws 4 at 1 and 2 at 2 (supply 8) for 5 over X to Y and 1 at home.

    Handling: W 0.1, X 0.2, Y 0.3. W>X: 5 x 0.1. X>Y: 5 x 0.2 + 5 x 0.3. At home: 1 x 0.1. Stock is
    walked in the order of the table and serves the place itself first: the bag at home costs 1,
    so W>X carries 3 at 1 and 2 at 2.
    """
    planned = plan_network(
        network_document(
            sites=[
                {"id": "W", "roles": ["warehouse", "ship_to"], "handling_cost": "0.1"},
                {"id": "X", "roles": ["cross_dock"], "handling_cost": "0.2"},
                {"id": "Y", "roles": ["ship_to"], "handling_cost": "0.3"},
            ],
            supply=[
                {"site": "W", "item": "GOODS", "quantity": "4", "unit_cost": "1", "lot": "A"},
                {"site": "W", "item": "GOODS", "quantity": "9", "unit_cost": "2", "lot": "B"},
            ],
            demand=[
                {"reference": "home", "site": "W", "item": "GOODS", "quantity": "1"},
                {"reference": "away", "site": "Y", "item": "GOODS", "quantity": "5"},
            ],
            lanes=[
                {"origin": "W", "destination": "X", "unit_cost": "10"},
                {"origin": "X", "destination": "Y", "unit_cost": "20"},
            ],
        )
    ).plan

    lines = {line["lane"]: line for line in planned["plan_lines"]}
    assert [line["lane"] for line in planned["plan_lines"]] == [None, "W>X", "X>Y"]
    assert (lines[None]["supply_cost"], lines[None]["handling_cost"]) == ("1", "0.1")
    assert (lines["W>X"]["supply_cost"], lines["W>X"]["handling_cost"]) == ("7", "0.5")
    assert (lines["X>Y"]["supply_cost"], lines["X>Y"]["handling_cost"]) == ("0", "2.5")
    assert planned["cost_parts"] == {
        "supply": "8",
        "handling": "3.1",
        "transport": "150",
        "charges": "0",
        "shortage": "0",
        "lateness": "0",
    }
    away = planned["order_lines"][0]
    assert [(source["lot"], source["quantity"]) for source in away["sources"]] == [
        ("A", "3"),
        ("B", "2"),
    ]
    assert away["sources"][0]["legs"] == [{"lane": "W>X"}, {"lane": "X>Y"}]


def test_shortage_money_is_part_of_the_total() -> None:
    """2 of 5 are there at 3 each; 3 short at 7 each: 6 + 21."""
    planned = plan_network(
        network_document(
            sites=[{"id": "W", "roles": ["warehouse"]}, {"id": "Y", "roles": ["ship_to"]}],
            supply=[{"site": "W", "item": "GOODS", "quantity": "2"}],
            demand=[{"site": "Y", "item": "GOODS", "quantity": "5", "shortage_cost": "7"}],
            lanes=[{"origin": "W", "destination": "Y", "unit_cost": "3"}],
        )
    ).plan

    assert planned["total_cost"] == "27"
    assert planned["cost_parts"]["shortage"] == "21"
    (line,) = planned["order_lines"]
    assert (line["priority"], line["shortage_cost"]) == (None, "7")


def test_rounded_demand_keeps_what_was_ordered() -> None:
    """7 in steps of 4 goes down to 4 or up to 8; a row that wants nothing is complete."""
    document = network_document(
        items=[{"id": "GOODS", "unit": "unit", "step": "4"}],
        sites=[{"id": "W", "roles": ["warehouse"]}, {"id": "Y", "roles": ["ship_to"]}],
        supply=[{"site": "W", "item": "GOODS", "quantity": "11"}],
        demand=[
            {"reference": "A", "site": "Y", "item": "GOODS", "quantity": "7"},
            {"reference": "B", "site": "Y", "item": "GOODS", "quantity": "0"},
        ],
        lanes=[{"origin": "W", "destination": "Y", "unit_cost": "1"}],
    )

    down = plan_network(document, demand_rounding="down").plan
    up = plan_network(document, demand_rounding="up").plan

    assert [(line["quantity"], line.get("ordered")) for line in down["order_lines"]] == [
        ("4", "7"),
        ("0", None),
    ]
    assert up["order_lines"][0]["quantity"] == "8"
    assert up["order_lines"][0]["served"] == "8"
    assert (down["totals"]["lines_complete"], down["totals"]["lines_none"]) == (2, 0)
    # 11 in steps of 4 are 8 to plan with.
    assert up["site_use"][0]["available"] == "8"


def test_pallet_that_does_not_divide_is_written_as_a_fraction() -> None:
    """10 bags on pallets of 48 are 5/24 of a pallet; without a weight the weight is unknown."""
    item = {"id": "GOODS", "unit": "bag", "packs": [{"unit": "pallet", "contains": "48"}]}
    planned = plan_network(
        network_document(
            items=[item],
            sites=[{"id": "W", "roles": ["warehouse"]}, {"id": "Y", "roles": ["ship_to"]}],
            supply=[{"site": "W", "item": "GOODS", "quantity": "10"}],
            demand=[{"site": "Y", "item": "GOODS", "quantity": "10"}],
            lanes=[{"origin": "W", "destination": "Y", "unit_cost": "1", "measure": "pallet"}],
        )
    ).plan

    (consignment,) = planned["consignments"]
    assert consignment["pallets"] == "5/24"
    assert consignment["weight_kg"] == "unknown"
    assert planned["total_cost"] == "5/24"
    assert planned["total_cost_rounded"] == "0.21"


def test_goods_that_only_circle_are_planned_and_warned_of() -> None:
    """A minimum of 3 on X>V is met by a loop that nobody's order line is part of."""
    planned = plan_network(
        network_document(
            sites=[
                {"id": "W", "roles": ["warehouse"]},
                {"id": "X", "roles": ["cross_dock"]},
                {"id": "V", "roles": ["cross_dock"]},
                {"id": "Y", "roles": ["ship_to"]},
            ],
            supply=[{"site": "W", "item": "GOODS", "quantity": "2"}],
            demand=[{"site": "Y", "item": "GOODS", "quantity": "2"}],
            lanes=[
                {"origin": "W", "destination": "X", "unit_cost": "1"},
                {"origin": "X", "destination": "Y", "unit_cost": "1"},
                {
                    "origin": "X",
                    "destination": "V",
                    "item": "GOODS",
                    "unit_cost": "1",
                    "must_ship": "3",
                },
                {"origin": "V", "destination": "X", "item": "GOODS", "unit_cost": "1"},
            ],
        )
    ).plan

    assert {line["lane"]: line["quantity"] for line in planned["plan_lines"]} == {
        "W>X": "2",
        "X>Y": "2",
        "X>V>GOODS": "3",
        "V>X>GOODS": "3",
    }
    (line,) = planned["order_lines"]
    assert line["sources"][0]["legs"] == [{"lane": "W>X"}, {"lane": "X>Y"}]
    assert [warning["code"] for warning in planned["warnings"]].count("flow_circles") == 1


@pytest.mark.parametrize(
    ("amount", "currency", "rounded"),
    [
        (Fraction("2.675"), "EUR", "2.68"),
        (Fraction("-2.675"), "EUR", "-2.68"),
        (Fraction("-0.004"), "EUR", "0.00"),
        (Fraction(5, 2), "JPY", "3"),
        (Fraction("0.0005"), "BHD", "0.001"),
        (Fraction(1234567), "EUR", "1234567.00"),
    ],
)
def test_money_is_rounded_half_away_from_zero(
    amount: Fraction, currency: str, rounded: str
) -> None:
    """The minor units are those of ISO 4217: none, 2 or 3 decimals; there is no minus zero."""
    assert rounded_money(amount, currency) == rounded
