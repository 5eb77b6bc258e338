"""The crates of the transportation case study by Mitchell et al. in the PuLP documentation.

Two warehouses, five bars; crates, dollars a crate. Status B for the cost: data seen, the optimum
recalled from memory and reproduced by four solvers. Status A for the variant with too little
stock: its data and the statement that it has no plan were seen.
"""

from fractions import Fraction

from tests.factories import cost_table, plan_network, transportation_network

SUPPLY_CRATES = {"A": 1000, "B": 4000}
TOO_LITTLE_CRATES = {"A": 1000, "B": 3000}
DEMAND_CRATES = {"1": 500, "2": 900, "3": 1800, "4": 200, "5": 700}
COST_DOLLARS = cost_table(["A", "B"], ["1", "2", "3", "4", "5"], [[2, 4, 5, 2, 1], [3, 1, 3, 2, 3]])
PUBLISHED_COST = 8600
# 4,000 crates for 4,100 that are wanted, every bar reached from both warehouses.
SHORT_CRATES = 100


def test_least_cost_equals_the_published_optimum() -> None:
    """The case study's optimum is reached; 900 of 5,000 crates stay."""
    network = transportation_network(SUPPLY_CRATES, DEMAND_CRATES, COST_DOLLARS)

    planned = plan_network(network, shortages="forbid")

    assert planned.total_cost == PUBLISHED_COST
    assert planned.gap == 0
    assert sum(Fraction(use["left"]) for use in planned.plan["site_use"]) == 900


def test_too_little_stock_has_no_plan_where_shortages_are_forbidden() -> None:
    """The case study calls it infeasible; the cut that says so is proved and names the amounts."""
    network = transportation_network(TOO_LITTLE_CRATES, DEMAND_CRATES, COST_DOLLARS)

    planned = plan_network(network, shortages="forbid")

    assert planned.outcome.state == "no_plan"
    (cut,) = planned.certificate["cuts"]
    assert Fraction(cut["forced_out"]) - Fraction(cut["can_enter"]) == SHORT_CRATES


def test_too_little_stock_is_short_by_exactly_what_is_missing() -> None:
    """Where shortages are allowed the same network has a plan that lacks 100 crates.

    There is enough for any one bar alone, so that whoever is short came after others.
    """
    network = transportation_network(TOO_LITTLE_CRATES, DEMAND_CRATES, COST_DOLLARS)

    planned = plan_network(network)

    assert planned.outcome.state == "planned"
    assert planned.short() == SHORT_CRATES
    assert {row["reason"] for row in planned.plan["shortages"]} == {"outranked"}
