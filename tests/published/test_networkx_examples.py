"""Small networks from the tests of networkx 3.6.1 (``algorithms/flow/tests/test_mincost.py``).

Status A: data and answers seen there. They are the odd ones: arcs without room, parts that do not
touch, costs of zero and below, a source that nothing leaves, supply that nobody wants.
"""

from fractions import Fraction

import pytest

from tests.factories import Amount, Arc, flow_network, plan_network
from tests.oracles import by_linear_programs, by_network_simplex

Published = tuple[dict[str, Amount], dict[str, Amount], list[Arc], int]

FOUR_NODES: Published = (
    {"a": 5},
    {"d": 5},
    [("a", "b", 3, 4), ("a", "c", 6, 10), ("b", "d", 1, 9), ("c", "d", 2, 5)],
    24,
)
# Ticket 617: arcs of capacity 0 are closed.
CLOSED_ARCS: Published = (
    {"1": 1, "2": 1},
    {"4": 2},
    [
        ("1", "2", 1, 1),
        ("1", "5", 1, 1),
        ("2", "3", 1, 0),
        ("2", "5", 1, 1),
        ("5", "3", 1, 2),
        ("5", "4", 1, 0),
        ("3", "4", 1, 2),
    ],
    6,
)
# Issue 1283: two parts, joined only by an arc without room, and nothing costs anything.
TWO_PARTS: Published = (
    {"0": 4, "4": 2, "5": 2},
    {"1": 2, "2": 2, "3": 4},
    [("0", "1", 0, 4), ("0", "2", 0, 4), ("4", "3", 0, 4), ("5", "3", 0, 4), ("0", "3", 0, 0)],
    0,
)

# Ticket 2906: nothing leaves the source.
DEAD_END_SUPPLY = {"4": 13}
DEAD_END_DEMAND = {"3": 13}
DEAD_END_ARCS: list[Arc] = [("0", "2", "0.1", 20), ("0", "3", "0.1", 20), ("2", "1", "0.1", 20)]

# All 5 must leave and only 4 are wanted; two arcs of capacity 3 stand in the way as well.
UNBALANCED_SUPPLY = {"s": 5}
UNBALANCED_DEMAND = {"t": 4}
UNBALANCED_ARCS: list[Arc] = [
    ("s", "a", 1, 3),
    ("a", "b", 3, None),
    ("a", "c", -6, None),
    ("b", "d", 1, None),
    ("c", "d", -2, None),
    ("d", "t", 1, 3),
]


@pytest.mark.parametrize(
    ("supply", "demand", "arcs", "published_cost"),
    [FOUR_NODES, CLOSED_ARCS, TWO_PARTS],
    ids=["four nodes", "closed arcs", "two parts"],
)
def test_least_cost_equals_the_published_optimum(
    supply: dict[str, Amount], demand: dict[str, Amount], arcs: list[Arc], published_cost: int
) -> None:
    """Supply equals demand in all of them, so that all of it leaves."""
    planned = plan_network(flow_network(supply, demand, arcs), shortages="forbid")

    assert planned.total_cost == published_cost
    assert planned.gap == 0
    assert all(Fraction(use["left"]) == 0 for use in planned.plan["site_use"])


def test_source_that_nothing_leaves_has_no_plan() -> None:
    """13 are wanted and none can come: the cut says so to the unit."""
    network = flow_network(DEAD_END_SUPPLY, DEAD_END_DEMAND, DEAD_END_ARCS)

    planned = plan_network(network, shortages="forbid")

    assert planned.outcome.state == "no_plan"
    (cut,) = planned.certificate["cuts"]
    assert Fraction(cut["forced_out"]) - Fraction(cut["can_enter"]) == 13


def test_source_that_nothing_leaves_is_short_of_everything() -> None:
    """With shortages allowed all 13 are short, and the reason is that no lane leads there."""
    planned = plan_network(flow_network(DEAD_END_SUPPLY, DEAD_END_DEMAND, DEAD_END_ARCS))

    assert planned.short() == 13
    assert [row["reason"] for row in planned.plan["shortages"]] == ["no_lane"]


@pytest.mark.parametrize("shortages", ["forbid", "allow"])
def test_supply_that_must_leave_and_cannot_has_no_plan(shortages: str) -> None:
    """What is forced stays hard although shortages are allowed: 5 must leave, 3 can."""
    network = flow_network(
        UNBALANCED_SUPPLY, UNBALANCED_DEMAND, UNBALANCED_ARCS, all_supply_leaves=True
    )

    planned = plan_network(network, shortages=shortages)

    assert planned.outcome.state == "no_plan"
    assert by_linear_programs(network, shortages=shortages) == {"GOODS": None}
    assert by_network_simplex(network, shortages=shortages) == {"GOODS": None}


def test_the_same_supply_that_may_stay_is_short_by_what_the_arcs_cannot_carry() -> None:
    """Without the force one of 4 is short, since 3 fit; each of them earns 1 - 6 - 2 + 1 = -6."""
    planned = plan_network(flow_network(UNBALANCED_SUPPLY, UNBALANCED_DEMAND, UNBALANCED_ARCS))

    assert planned.short() == 1
    assert planned.total_cost == 3 * -6
