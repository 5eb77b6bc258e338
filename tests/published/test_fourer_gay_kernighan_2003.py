"""Fourer, Gay and Kernighan, textbook on modelling for mathematical programming, 2nd ed. (2003).

Figure 3-1: steel from three mills to seven factories (tons, dollars a ton). Chapter 15: packages
through two distribution centres (thousand packages, dollars a package). Status A: data seen in the
book's public data files or a public text, optima, plans and reduced costs in a translated edition.
"""

from fractions import Fraction

import pytest

from tests.factories import Arc, cost_table, flow_network, plan_network, transportation_network
from tests.oracles import is_only_plan

SUPPLY_TONS = {"GARY": 1400, "CLEV": 2600, "PITT": 2900}
DEMAND_TONS = {
    "FRA": 900,
    "DET": 1200,
    "LAN": 600,
    "WIN": 400,
    "STL": 1700,
    "FRE": 1100,
    "LAF": 1000,
}
COST_DOLLARS = cost_table(
    list(SUPPLY_TONS),
    list(DEMAND_TONS),
    [
        [39, 14, 11, 14, 16, 82, 8],
        [27, 9, 12, 9, 26, 95, 17],
        [24, 14, 17, 13, 28, 99, 20],
    ],
)
PUBLISHED_STEEL_COST = 196_200
PUBLISHED_STEEL_PLAN = {
    ("CLEV", "DET"): 1200,
    ("CLEV", "LAF"): 400,
    ("CLEV", "LAN"): 600,
    ("CLEV", "WIN"): 400,
    ("GARY", "FRE"): 1100,
    ("GARY", "STL"): 300,
    ("PITT", "FRA"): 900,
    ("PITT", "LAF"): 600,
    ("PITT", "STL"): 1400,
}

SUPPLY_PACKAGES = {"PITT": 450}
DEMAND_PACKAGES = {"BOS": 90, "EWR": 120, "BWI": 120, "ATL": 70, "MCO": 50}
PACKAGE_ARCS: list[Arc] = [
    ("PITT", "NE", "2.5", 250),
    ("PITT", "SE", "3.5", 250),
    ("NE", "BOS", "1.7", 100),
    ("NE", "EWR", "0.7", 100),
    ("NE", "BWI", "1.3", 100),
    ("SE", "EWR", "1.3", 100),
    ("SE", "BWI", "0.8", 100),
    ("SE", "ATL", "0.2", 100),
    ("SE", "MCO", "2.1", 100),
]
PUBLISHED_PACKAGE_COST = 1819
PUBLISHED_PACKAGE_PLAN = {
    ("PITT", "NE"): 250,
    ("PITT", "SE"): 200,
    ("NE", "BOS"): 90,
    ("NE", "EWR"): 100,
    ("NE", "BWI"): 60,
    ("SE", "EWR"): 20,
    ("SE", "BWI"): 60,
    ("SE", "ATL"): 70,
    ("SE", "MCO"): 50,
}
# What one more unit of capacity of a full lane changes, as printed.
PUBLISHED_REDUCED_COSTS = {("PITT", "NE"): "-0.5", ("NE", "EWR"): "-1.1"}


def test_steel_costs_the_published_optimum() -> None:
    """Every mill ships all it has. The book shows two best plans, so that the cost is compared."""
    network = transportation_network(SUPPLY_TONS, DEMAND_TONS, COST_DOLLARS)

    planned = plan_network(network, shortages="forbid")

    assert planned.total_cost == PUBLISHED_STEEL_COST
    assert planned.gap == 0
    assert all(Fraction(use["left"]) == 0 for use in planned.plan["site_use"])


def test_the_published_steel_plan_costs_as_much() -> None:
    """The printed plan and the printed optimum belong together, which guards the copied table."""
    cost = sum(
        int(COST_DOLLARS[origin][destination]) * tons
        for (origin, destination), tons in PUBLISHED_STEEL_PLAN.items()
    )

    assert cost == PUBLISHED_STEEL_COST


def test_packages_follow_the_published_plan() -> None:
    """Two judges know no other plan as good, so that the printed one must come out."""
    network = flow_network(SUPPLY_PACKAGES, DEMAND_PACKAGES, PACKAGE_ARCS)

    planned = plan_network(network, shortages="forbid")

    assert is_only_plan(network, shortages="forbid")
    assert planned.total_cost == PUBLISHED_PACKAGE_COST
    assert planned.gap == 0
    assert planned.moves() == PUBLISHED_PACKAGE_PLAN


@pytest.mark.parametrize("lane", PUBLISHED_REDUCED_COSTS)
def test_room_for_one_more_changes_the_cost_by_the_published_reduced_cost(
    lane: tuple[str, str],
) -> None:
    """Both full lanes would lower the cost by the printed amount if they were one wider."""
    arcs: list[Arc] = [
        (start, end, cost, int(capacity or 0) + ((start, end) == lane))
        for start, end, cost, capacity in PACKAGE_ARCS
    ]

    planned = plan_network(flow_network(SUPPLY_PACKAGES, DEMAND_PACKAGES, arcs), shortages="forbid")

    assert planned.total_cost - PUBLISHED_PACKAGE_COST == Fraction(PUBLISHED_REDUCED_COSTS[lane])
