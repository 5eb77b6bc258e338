"""Winston, *Operations Research: Applications and Algorithms*, section 7.1: power for cities.

Status B: data seen in several public course notebooks, the optimum recalled from memory and
reproduced by four solvers. Million kWh; dollars per million kWh.
"""

from fractions import Fraction

from tests.factories import cost_table, plan_network, transportation_network

SUPPLY_MILLION_KWH = {"P1": 35, "P2": 50, "P3": 40}
DEMAND_MILLION_KWH = {"C1": 45, "C2": 20, "C3": 30, "C4": 30}
COST_DOLLARS = cost_table(
    ["P1", "P2", "P3"],
    ["C1", "C2", "C3", "C4"],
    [[8, 6, 10, 9], [9, 12, 13, 7], [14, 9, 16, 5]],
)
PUBLISHED_COST = 1020


def test_least_cost_equals_the_published_optimum() -> None:
    """125 are there and 125 are wanted, so that every plant sends all it has."""
    network = transportation_network(SUPPLY_MILLION_KWH, DEMAND_MILLION_KWH, COST_DOLLARS)

    planned = plan_network(network, shortages="forbid")

    assert planned.total_cost == PUBLISHED_COST
    assert planned.gap == 0
    assert all(Fraction(use["left"]) == 0 for use in planned.plan["site_use"])
