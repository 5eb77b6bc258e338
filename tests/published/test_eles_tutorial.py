"""Eles, *Tutorial for Operations Research: Modeling in GNU MathProg*, University of Pannonia.

The chapter on transportation: Problem 22, and the variant in which demand may be missed or passed
for a penalty. Status A: data and optima seen in the tutorial's attachments with their solver logs.
"""

from fractions import Fraction

import pytest

from tests.factories import Document, cost_table, plan_network, transportation_network

SUPPLY = {"S1": 100, "S2": 250, "S3": 190, "S4": 210}
DEMAND = {"D1": 120, "D2": 140, "D3": 170, "D4": 90, "D5": 110, "D6": 120}
COST = cost_table(
    list(SUPPLY),
    list(DEMAND),
    [
        [5, 10, 3, 9, 5, 12],
        [1, 2, 6, 1, 2, 6],
        [6, 5, 1, 6, 4, 8],
        [9, 10, 6, 8, 9, 7],
    ],
)
PUBLISHED_COST = 2700
# The variant: each unit that is missing costs 15, each beyond what is wanted 10. Both are dear
# enough for the optimum to stay.
SHORTAGE_PENALTY = 15
SURPLUS_PENALTY = 10
PUBLISHED_COST_WITH_PENALTIES = 2700


def test_least_cost_equals_the_published_optimum() -> None:
    """750 are there and wanted; other plans cost the same, so the cost is compared."""
    planned = plan_network(transportation_network(SUPPLY, DEMAND, COST), shortages="forbid")

    assert planned.total_cost == PUBLISHED_COST
    assert planned.gap == 0


def test_one_more_has_no_plan_and_one_less_saves_eight() -> None:
    """Marginal costs have two sides: status C, computed by re-solving with two solvers."""
    more = transportation_network(SUPPLY, DEMAND | {"D1": 121}, COST)
    less = transportation_network(SUPPLY, DEMAND | {"D1": 119}, COST)

    assert plan_network(more, shortages="forbid").outcome.state == "no_plan"
    assert plan_network(less, shortages="forbid").total_cost == PUBLISHED_COST - 8


def with_penalties(demand: dict[str, int]) -> Document:
    """Return the network in which each demand competes in money and may be exceeded.

    What is beyond a demand goes on, for the penalty of a surplus, to a place that takes anything
    and misses nothing.
    """
    network = transportation_network(SUPPLY, demand, COST)
    for row in network["demand"]:
        row["shortage_cost"] = str(SHORTAGE_PENALTY)
    for site in network["sites"]:
        if "ship_to" in site["roles"]:
            site["roles"] = ["ship_to", "cross_dock"]
    network["sites"].append({"id": "beyond", "roles": ["ship_to"]})
    network["demand"].append(
        {
            "reference": "beyond",
            "site": "beyond",
            "item": "GOODS",
            "quantity": str(sum(SUPPLY.values())),
            "shortage_cost": "0",
        }
    )
    network["lanes"] += [
        {
            "id": f"beyond {place}",
            "origin": place,
            "destination": "beyond",
            "unit_cost": str(SURPLUS_PENALTY),
        }
        for place in demand
    ]
    return network


def test_dear_penalties_leave_the_published_optimum() -> None:
    """Nothing is missed or exceeded when both cost more than they save."""
    planned = plan_network(with_penalties(DEMAND))

    assert planned.total_cost == PUBLISHED_COST_WITH_PENALTIES
    assert planned.gap == 0
    assert planned.plan["cost_parts"]["shortage"] == "0"
    assert not [ends for ends in planned.moves() if ends[1] == "beyond"]


@pytest.mark.parametrize("missing", [1, 30])
def test_what_no_stock_is_left_for_costs_its_penalty(missing: int) -> None:
    """With more wanted than there is, exactly the difference is short, at 15 each."""
    planned = plan_network(with_penalties(DEMAND | {"D6": DEMAND["D6"] + missing}))

    short = sum(
        Fraction(row["quantity"])
        for row in planned.plan["shortages"]
        if row["reference"] != "beyond"
    )
    assert short == missing
    assert Fraction(planned.plan["cost_parts"]["shortage"]) == missing * SHORTAGE_PENALTY
