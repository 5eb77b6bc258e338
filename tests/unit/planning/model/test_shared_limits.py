"""Which limits items share, what method that needs, and what a plan of them says; by hand."""

from fractions import Fraction
from typing import Any

import pytest

from tests.factories import Planned, network_document, plan_network

ITEMS = [
    {"id": "HEAVY", "unit": "bag", "weight_kg": "40"},
    {"id": "LIGHT", "unit": "bag", "weight_kg": "25"},
]
SITES = [
    {"id": "NEAR", "roles": ["warehouse"]},
    {"id": "FAR", "roles": ["warehouse"]},
    {"id": "SHOP", "roles": ["ship_to"]},
]


def network(
    *, capacity: str | None = None, rules: tuple[dict[str, Any], ...] = (), bags: int = 10
) -> dict[str, Any]:
    """Return two items, each at both warehouses; far goods cost 3 a bag, near ones 1."""
    lane = {"measure": "unit"} if capacity is None else {"measure": "weight_kg", "per": "together"}
    near: dict[str, Any] = {"id": "N", "origin": "NEAR", "destination": "SHOP", "unit_cost": "1"}
    if capacity is not None:
        near |= {"capacity": capacity, "unit_cost": "0.04", **lane}
    return network_document(
        items=ITEMS,
        sites=SITES,
        supply=[
            {"site": site, "item": item["id"], "quantity": "100"}
            for site in ("NEAR", "FAR")
            for item in ITEMS
        ],
        demand=[
            {"reference": item["id"], "site": "SHOP", "item": item["id"], "quantity": str(bags)}
            for item in ITEMS
        ],
        lanes=[near, {"id": "F", "origin": "FAR", "destination": "SHOP", "unit_cost": "3"}],
        rules=rules,
    )


def test_a_lane_for_all_items_together_carries_no_more_than_its_weight() -> None:
    """300 kg take 12 bags of 25 kg, or fewer of 40: near they cost 0.04 a kg instead of 3 a bag.

    A bag of LIGHT near saves 2 for 25 kg, one of HEAVY 1.4 for 40: ten LIGHT go near (250 kg), one
    HEAVY (40 kg), and 10 kg stay free. In parts, 1.25 HEAVY would cost 0.25 * 1.4 less, 38.25; as
    all costs are multiples of 0.2, none is below 38.4.
    """
    planned = plan_network(network(capacity="300"))

    assert planned.plan["method"] == "linear_program"
    assert planned.shipped() == {"N LIGHT": 10, "N HEAVY": 1, "F HEAVY": 9}
    assert planned.total_cost == Fraction("10") + Fraction("1.6") + 27
    assert planned.gap == Fraction("0.2")
    assert planned.certificate["lexicographic"] == "best_found"


def test_a_limit_that_no_plan_could_reach_needs_no_other_method() -> None:
    """A lane that takes 100 bags of each cannot carry more than 6500 kg, and may carry as many."""
    document = network()
    document["lanes"][0] |= {"capacity": "100", "per": "item"}
    rule = {
        "rule": "shared_capacity",
        "id": "R",
        "lanes": {"ids": ["N"]},
        "measure": "weight_kg",
        "maximum": "6600",
    }
    planned = plan_network(document | {"rules": [rule]})

    assert planned.plan["method"] == "min_cost_flow"
    assert planned.plan["method_reasons"] == []


def test_the_plan_says_what_needs_the_linear_program_and_what_a_kilogram_more_would_save() -> None:
    """The door takes 260 kg: ten LIGHT, and a quarter of a HEAVY by the price of a kilogram."""
    rule = {
        "rule": "throughput",
        "id": "DOOR",
        "sites": {"ids": ["NEAR"]},
        "flow": "sent",
        "measure": "weight_kg",
        "maximum": "260",
    }
    planned = plan_network(network(rules=(rule,)))

    assert planned.plan["method_reasons"] == [
        "Rule DOOR (throughput): 1 limit in weight_kg over several items, lanes or stocks."
    ]
    listed = planned.plan["rules_in_force"][0]
    assert listed["binding"]
    # A bag near saves 2; the last kilogram would go to HEAVY: 2 / 40.
    assert listed["one_more"] == [
        {"site": "NEAR", "lane": None, "measure": "weight_kg", "cost": "-0.05"}
    ]


def test_shortage_goes_where_the_shared_limit_serves_most_of_the_first_priority() -> None:
    """Only 250 kg can come: priority 1 is HEAVY, so six go, and the last 10 kg serve no LIGHT."""
    door = {
        "rule": "throughput",
        "id": "DOOR",
        "sites": {"ids": ["SHOP"]},
        "flow": "received",
        "measure": "weight_kg",
        "maximum": "250",
    }
    document = network(rules=(door,))
    document["demand"][0]["priority"] = 1

    planned = plan_network(document)

    short = {row["reference"]: row["quantity"] for row in planned.plan["shortages"]}
    assert short == {"HEAVY": "4", "LIGHT": "10"}
    steps = planned.certificate["steps"]
    assert [(step.get("priority"), step["achieved"], step["bound"]) for step in steps][:2] == [
        (1, "4", "4"),
        (5, "10", "10"),
    ]
    assert planned.certificate["lexicographic"] == "proved"


def test_rules_that_contradict_each_other_are_named_and_none_is_too_many() -> None:
    """What must be served weighs 650 kg; DOOR lets 400 in. WIDE has nothing to do with it."""
    rules = (
        {
            "rule": "throughput",
            "id": "DOOR",
            "sites": {"ids": ["SHOP"]},
            "flow": "received",
            "measure": "weight_kg",
            "maximum": "400",
        },
        {
            "rule": "shared_capacity",
            "id": "WIDE",
            "lanes": {"origin": ["FAR"]},
            "measure": "weight_kg",
            "maximum": "500",
        },
    )
    planned = plan_network(network(rules=rules), shortages="forbid")

    assert planned.plan["status"] == "no_plan"
    (reason,) = planned.plan["reason"]["together"]
    assert reason["rules"] == ["DOOR"]
    assert reason["detail"] == (
        "HEAVY and LIGHT: with the stock and lanes there are, these contradict each other, and "
        "none is too many: rule DOOR at SHOP (at most 400 weight_kg), and everything ordered is "
        "served."
    )


def test_goods_that_divide_would_have_a_plan_but_whole_bags_have_none() -> None:
    """Exactly 60 kg on a lane: no bags of 25 and 40 kg weigh as much, and the plan says so."""
    document = network()
    document["lanes"].append(
        {
            "id": "ODD",
            "origin": "FAR",
            "destination": "SHOP",
            "unit_cost": "0",
            "measure": "weight_kg",
            "must_ship": "60",
            "capacity": "60",
            "per": "together",
        }
    )

    planned = plan_network(document)

    assert planned.plan["status"] == "no_plan"
    (reason,) = planned.plan["reason"]["together"]
    assert reason["whole_steps"]
    assert "in whole steps none was found" in reason["detail"]


@pytest.mark.parametrize("maximum", ["0", "39", "40", "79.9", "1000"])
def test_rules_of_each_lane_and_of_all_together_agree_on_one_lane(maximum: str) -> None:
    """Per each and per together are the same where one lane is picked."""

    def planned(per: str) -> Planned:
        rule = {
            "rule": "shared_capacity",
            "id": "R",
            "lanes": {"ids": ["N"]},
            "measure": "weight_kg",
            "maximum": maximum,
            "per": per,
        }
        return plan_network(network(rules=(rule,)))

    assert planned("each").shipped() == planned("together").shipped()
