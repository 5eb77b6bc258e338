"""Taha, *Operations Research: An Introduction*, Example 5.3-1 (Table 5.8): grain silos and mills.

Status A: data, the optimum and the heuristic starting solutions seen in a text that prints the
book's values. Truckloads; hundred dollars a truckload.
"""

from fractions import Fraction

from tests.factories import cost_table, plan_network, transportation_network

SUPPLY_TRUCKLOADS = {"S1": 15, "S2": 25, "S3": 10}
DEMAND_TRUCKLOADS = {"M1": 5, "M2": 15, "M3": 15, "M4": 15}
COST_HUNDRED_DOLLARS = cost_table(
    ["S1", "S2", "S3"],
    ["M1", "M2", "M3", "M4"],
    [[10, 2, 20, 11], [12, 7, 9, 20], [4, 14, 16, 18]],
)
PUBLISHED_COST = 435
# The book's starting solutions, which are not the answer: north-west corner, least cost, Vogel.
PUBLISHED_HEURISTICS = (520, 475, 475)


def test_least_cost_equals_the_published_optimum() -> None:
    """The optimum is reached, no starting solution; supply is demand, so that all leaves."""
    network = transportation_network(SUPPLY_TRUCKLOADS, DEMAND_TRUCKLOADS, COST_HUNDRED_DOLLARS)

    planned = plan_network(network, shortages="forbid")

    assert planned.total_cost == PUBLISHED_COST
    assert planned.total_cost < min(PUBLISHED_HEURISTICS)
    assert planned.gap == 0
    assert all(Fraction(use["left"]) == 0 for use in planned.plan["site_use"])
