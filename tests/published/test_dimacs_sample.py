"""The sample network of the DIMACS minimum-cost-flow format (First Implementation Challenge).

Status A: data, optimum and flows seen in the lp_solve reference guide's page about the format.
"""

from tests.factories import Arc, flow_network, plan_network
from tests.oracles import is_only_plan

SUPPLY = {"1": 4}
DEMAND = {"4": 4}
ARCS: list[Arc] = [
    ("1", "2", 2, 4),
    ("1", "3", 2, 2),
    ("2", "3", 1, 2),
    ("2", "4", 3, 3),
    ("3", "4", 1, 5),
]
PUBLISHED_COST = 14
PUBLISHED_FLOWS = {("1", "2"): 2, ("1", "3"): 2, ("2", "3"): 2, ("3", "4"): 4}


def test_sample_follows_the_published_flows() -> None:
    """The printed flows are the only best ones, and lane 2 to 4 carries nothing."""
    network = flow_network(SUPPLY, DEMAND, ARCS)

    planned = plan_network(network, shortages="forbid")

    assert is_only_plan(network, shortages="forbid")
    assert planned.total_cost == PUBLISHED_COST
    assert planned.gap == 0
    assert planned.moves() == PUBLISHED_FLOWS
