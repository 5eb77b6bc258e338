"""Transportation example of Dantzig, *Linear Programming and Extensions* (1963), chapter 3-3.

Status A: data seen in a distributed example file, the optimum in a printed solver report. Cases per
day; thousand dollars a case, which is 90 dollars per case and thousand miles: the book's distances
are in thousand miles, so that 2.5 of them cost 0.225.
"""

from fractions import Fraction
from typing import Any

import pytest

from tests.factories import cost_table, plan_network, transportation_network

SUPPLY_CASES = {"Seattle": 350, "San-Diego": 600}
DEMAND_CASES = {"New-York": 325, "Chicago": 300, "Topeka": 275}
COST_THOUSAND_DOLLARS = cost_table(
    ["Seattle", "San-Diego"],
    ["New-York", "Chicago", "Topeka"],
    [["0.225", "0.153", "0.162"], ["0.225", "0.162", "0.126"]],
)
PUBLISHED_COST = Fraction("153.675")
# Status C: computed, the same by HiGHS simplex, HiGHS interior point and GLOP. The stock that is
# left over fixes the level of the prices, so that one more and one less agree.
COST_OF_ONE_CASE = {"New-York": "0.225", "Chicago": "0.153", "Topeka": "0.126"}


def network(demand: dict[str, int]) -> dict[str, Any]:
    """Return the example with other demand."""
    return transportation_network(SUPPLY_CASES, demand, COST_THOUSAND_DOLLARS)


def test_least_cost_equals_the_published_optimum() -> None:
    """The book's optimum is reached exactly; 50 of 950 cases stay where they are.

    The plan is not compared: New York is served from either place at the same cost.
    """
    planned = plan_network(network(DEMAND_CASES), shortages="forbid")

    assert planned.total_cost == PUBLISHED_COST
    assert planned.gap == 0
    assert sum(Fraction(use["left"]) for use in planned.plan["site_use"]) == 50


@pytest.mark.parametrize("change", [1, -1])
@pytest.mark.parametrize("market", DEMAND_CASES)
def test_one_case_more_or_less_changes_the_cost_by_its_price(market: str, change: int) -> None:
    """Marginal costs are two-sided here, and a re-solved network must show them."""
    demand = DEMAND_CASES | {market: DEMAND_CASES[market] + change}

    planned = plan_network(network(demand), shortages="forbid")

    assert planned.total_cost - PUBLISHED_COST == change * Fraction(COST_OF_ONE_CASE[market])
