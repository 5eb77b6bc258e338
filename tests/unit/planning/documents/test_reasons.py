"""Every shortage has the one reason that a planner can act on; each case is derived by hand."""

from collections.abc import Mapping, Sequence
from typing import Any

import pytest

from tests.factories import network_document, plan_network

Row = Mapping[str, Any]

SITES = (
    {"id": "W", "roles": ["warehouse"]},
    {"id": "V", "roles": ["warehouse"]},
    {"id": "Y", "roles": ["ship_to"]},
    {"id": "Z", "roles": ["ship_to"]},
)


def shortages(
    *,
    stock: Mapping[str, str],
    demand: Sequence[Row],
    lanes: Sequence[Row],
    rules: Sequence[Row] = (),
) -> list[dict[str, Any]]:
    """Plan and prove a network of one good and return what is short."""
    planned = plan_network(
        network_document(
            sites=SITES,
            supply=[
                {"site": site, "item": "GOODS", "quantity": quantity}
                for site, quantity in stock.items()
            ],
            demand=[{"item": "GOODS", **row} for row in demand],
            lanes=[{"unit_cost": "3", **row} for row in lanes],
            rules=rules,
        )
    )
    rows: list[dict[str, Any]] = planned.plan["shortages"]
    return rows


def reason(
    *,
    stock: Mapping[str, str],
    demand: Sequence[Row],
    lanes: Sequence[Row],
    rules: Sequence[Row] = (),
) -> str:
    """Return the reason of the only shortage."""
    (row,) = shortages(stock=stock, demand=demand, lanes=lanes, rules=rules)
    return str(row["reason"])


W_TO_Y = {"origin": "W", "destination": "Y"}
Y_WANTS_6 = {"reference": "Y1", "site": "Y", "quantity": "6"}


def test_no_way_at_all_is_no_lane() -> None:
    """Stock lies at W, and only Z can be reached from there."""
    to_z = {"origin": "W", "destination": "Z"}
    z_wants = {"reference": "Z1", "site": "Z", "quantity": "1"}

    assert reason(stock={"W": "10"}, demand=[Y_WANTS_6, z_wants], lanes=[to_z]) == "no_lane"


def test_way_through_a_closure_only_is_closed() -> None:
    """The one lane is closed, or the site it leaves from is."""
    for closure in ({"lanes": {"origin": ["W"]}}, {"sites": {"ids": ["W"]}}):
        rule = {"rule": "closure", "id": "R", **closure}

        found = reason(stock={"W": "10"}, demand=[Y_WANTS_6], lanes=[W_TO_Y], rules=[rule])

        assert found == "closed"


def test_too_little_for_this_line_alone_is_no_stock() -> None:
    """5 of the 6 are there; also where there is none at all."""
    assert reason(stock={"W": "5"}, demand=[Y_WANTS_6], lanes=[W_TO_Y]) == "no_stock"
    assert reason(stock={"W": "0"}, demand=[Y_WANTS_6], lanes=[W_TO_Y]) == "no_stock"


def test_full_lane_is_lane_full() -> None:
    """The lane takes 4 of 6; there is stock enough."""
    lane = {**W_TO_Y, "capacity": "4", "per": "item"}

    assert reason(stock={"W": "10"}, demand=[Y_WANTS_6], lanes=[lane]) == "lane_full"


def test_full_site_is_site_full() -> None:
    """W sends at most 4 of its 10."""
    rule = {
        "rule": "throughput",
        "id": "DOORS",
        "sites": {"ids": ["W"]},
        "flow": "sent",
        "maximum": "4",
    }

    found = reason(stock={"W": "10"}, demand=[Y_WANTS_6], lanes=[W_TO_Y], rules=[rule])

    assert found == "site_full"


def test_fixed_quantity_is_a_rule() -> None:
    """Exactly 4 move, whatever is wanted."""
    rule = {"rule": "fixed_quantity", "id": "FOUR", "lanes": {"origin": ["W"]}, "quantity": "4"}

    assert reason(stock={"W": "10"}, demand=[Y_WANTS_6], lanes=[W_TO_Y], rules=[rule]) == "rule"


def test_minimum_elsewhere_takes_stock_first() -> None:
    """7 of 10 must go to Z, which wants 7 at priority 9; more stock would help Y, or no minimum."""
    demand: list[Row] = [
        {**Y_WANTS_6, "priority": 1},
        {"site": "Z", "quantity": "7", "priority": 9},
    ]
    lanes = [W_TO_Y, {"origin": "W", "destination": "Z", "must_ship": "7", "per": "item"}]

    assert reason(stock={"W": "10"}, demand=demand, lanes=lanes) == "no_stock"


@pytest.mark.parametrize("lines", [1, 2])
def test_stock_of_its_own_counts_beside_minimums_elsewhere(lines: int) -> None:
    """Z has 2 at 8 each: enough for the first line, not for both; the minimum changes nothing."""
    sites = [{"id": "W", "roles": ["warehouse"]}, {"id": "Y", "roles": ["ship_to"]}]
    dear = {"reference": "dear", "quantity": "2", "worth_at_most": "5"}
    more = {"reference": "more", "quantity": "9", "worth_at_most": "4"}
    planned = plan_network(
        network_document(
            sites=[*sites, {"id": "Z", "roles": ["ship_to", "warehouse"]}],
            supply=[
                {"site": "W", "item": "GOODS", "quantity": "1"},
                {"site": "Z", "item": "GOODS", "quantity": "2", "unit_cost": "8"},
            ],
            demand=[
                {"site": "Y", "item": "GOODS", "quantity": "1"},
                *({"site": "Z", "item": "GOODS", **line} for line in (dear, more)[:lines]),
            ],
            lanes=[
                {"origin": "W", "destination": "Y", "unit_cost": "3", "item": "GOODS"}
                | {"must_ship": "1"}
            ],
        )
    )

    reasons = [(row["reference"], row["reason"]) for row in planned.plan["shortages"]]
    assert reasons == [("dear", "not_worth_it"), ("more", "no_stock")][:lines]


def test_outranked_names_the_largest_that_went_first() -> None:
    """10 are shared by 5 + 3 of priority 1 and 6 of priority 2, which gets 2."""
    demand: list[Row] = [
        {"reference": "A", "site": "Z", "quantity": "3", "priority": 1},
        {"reference": "B", "site": "Z", "quantity": "5", "priority": 1},
        {**Y_WANTS_6, "priority": 2},
    ]
    lanes = [W_TO_Y, {"origin": "W", "destination": "Z"}]

    (row,) = shortages(stock={"W": "10"}, demand=demand, lanes=lanes)

    assert row == {
        "reference": "Y1",
        "site": "Y",
        "item": "GOODS",
        "priority": 2,
        "quantity": "4",
        "reason": "outranked",
        "next_chance": None,
        "outranked_by": {"reference": "B", "quantity": "5", "priority": 1, "lines": 2},
    }


def test_lines_with_stock_of_their_own_outrank_nobody() -> None:
    """Z takes 8 of its own warehouse V; only the line that shares W went first."""
    demand: list[Row] = [
        {"reference": "A", "site": "Z", "quantity": "8", "priority": 1},
        {"reference": "B", "site": "Y", "quantity": "2", "priority": 1},
        {**Y_WANTS_6, "priority": 2},
    ]
    lanes = [W_TO_Y, {"origin": "V", "destination": "Z"}]

    (row,) = shortages(stock={"W": "7", "V": "8"}, demand=demand, lanes=lanes)

    assert row["outranked_by"] == {"reference": "B", "quantity": "2", "priority": 1, "lines": 1}


def test_line_that_costs_more_than_it_is_worth() -> None:
    """A step to Y costs 3; at most 2 is worth it, so it stays though stock is left."""
    line = {**Y_WANTS_6, "worth_at_most": "2"}

    assert reason(stock={"W": "10"}, demand=[line], lanes=[W_TO_Y]) == "not_worth_it"


def test_money_gives_way_to_priorities_and_to_more_money() -> None:
    """Of 6, priority 1 takes 4; of the other two lines the one that costs more short gets 2."""
    demand: list[Row] = [
        {"reference": "A", "site": "Y", "quantity": "4", "priority": 1},
        {"reference": "B", "site": "Y", "quantity": "2", "shortage_cost": "90"},
        {"reference": "C", "site": "Y", "quantity": "2", "shortage_cost": "80"},
    ]

    (row,) = shortages(stock={"W": "6"}, demand=demand, lanes=[W_TO_Y])

    assert (row["reference"], row["reason"], row["priority"]) == ("C", "outranked", None)
    assert row["outranked_by"] == {"reference": "A", "quantity": "4", "priority": 1, "lines": 2}


def test_kept_stock_that_is_short_says_so() -> None:
    """V should keep 5 and has 3, of which a line of higher priority takes 1."""
    planned = plan_network(
        network_document(
            sites=[{"id": "V", "roles": ["warehouse", "ship_to"]}],
            supply=[
                {
                    "site": "V",
                    "item": "GOODS",
                    "quantity": "3",
                    "keep": {"quantity": "5", "priority": 4},
                }
            ],
            demand=[{"site": "V", "item": "GOODS", "quantity": "1", "priority": 1}],
            lanes=[],
        )
    )

    assert planned.plan["shortages"] == [
        {
            "reference": None,
            "site": "V",
            "item": "GOODS",
            "priority": 4,
            "quantity": "3",
            "reason": "no_stock",
            "next_chance": None,
            "kept": True,
        }
    ]
