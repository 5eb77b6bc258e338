"""Bradley, Hax and Magnanti, *Applied Mathematical Programming* (1977), chapter 8: a five-node net.

Status A: data and optimum seen in the tests of networkx 3.6.1 (``test_mincost.py``), which name the
book. Supply equals demand, so that all of it leaves.
"""

from fractions import Fraction

from tests.factories import Arc, flow_network, plan_network

SUPPLY = {"1": 20}
DEMAND = {"4": 5, "5": 15}
ARCS: list[Arc] = [
    ("1", "2", 4, 15),
    ("1", "3", 4, 8),
    ("2", "3", 2, None),
    ("2", "4", 2, 4),
    ("2", "5", 6, 10),
    ("3", "4", 1, 15),
    ("3", "5", 3, 5),
    ("4", "5", 2, None),
    ("5", "3", 1, 4),
]
PUBLISHED_COST = 150


def test_least_cost_equals_the_published_optimum() -> None:
    """Demand sits on nodes that also pass goods on, and two arcs make a loop."""
    planned = plan_network(flow_network(SUPPLY, DEMAND, ARCS), shortages="forbid")

    assert planned.total_cost == PUBLISHED_COST
    assert planned.gap == 0
    assert all(Fraction(use["left"]) == 0 for use in planned.plan["site_use"])
