"""Steel in three products from three mills to seven factories, by Fourer, Gay and Kernighan (2003).

Textbook on modelling for mathematical programming, 2nd ed., figures 4-1 and 4-2 (multicommodity
transportation). Status A: data seen in the book"s public data files, the optimum in a translated
edition. Tons; dollars a ton; 625 tons on each of the 21 ways, for all products together.
"""

from fractions import Fraction
from typing import Any

from tests.factories import network_document, plan_network

PRODUCTS = ("bands", "coils", "plate")
SUPPLY_TONS = {
    "GARY": (400, 800, 200),
    "CLEV": (700, 1600, 300),
    "PITT": (800, 1800, 300),
}
DEMAND_TONS = {
    "FRA": (300, 500, 100),
    "DET": (300, 750, 100),
    "LAN": (100, 400, 0),
    "WIN": (75, 250, 50),
    "STL": (650, 950, 200),
    "FRE": (225, 850, 100),
    "LAF": (250, 500, 250),
}
# Dollars a ton by mill and factory, in the order of the products.
COST_DOLLARS = {
    ("GARY", "FRA"): (30, 39, 41),
    ("GARY", "DET"): (10, 14, 15),
    ("GARY", "LAN"): (8, 11, 12),
    ("GARY", "WIN"): (10, 14, 16),
    ("GARY", "STL"): (11, 16, 17),
    ("GARY", "FRE"): (71, 82, 86),
    ("GARY", "LAF"): (6, 8, 8),
    ("CLEV", "FRA"): (22, 27, 29),
    ("CLEV", "DET"): (7, 9, 9),
    ("CLEV", "LAN"): (10, 12, 13),
    ("CLEV", "WIN"): (7, 9, 9),
    ("CLEV", "STL"): (21, 26, 28),
    ("CLEV", "FRE"): (82, 95, 99),
    ("CLEV", "LAF"): (13, 17, 18),
    ("PITT", "FRA"): (19, 24, 26),
    ("PITT", "DET"): (11, 14, 14),
    ("PITT", "LAN"): (12, 17, 17),
    ("PITT", "WIN"): (10, 13, 13),
    ("PITT", "STL"): (25, 28, 31),
    ("PITT", "FRE"): (83, 99, 104),
    ("PITT", "LAF"): (15, 20, 20),
}
JOINT_TONS = 625
PUBLISHED_COST = 199500


def network(joint: int) -> dict[str, Any]:
    """Return the example with so many tons on each way, for all products together."""
    return network_document(
        items=[{"id": product, "unit": "TNE"} for product in PRODUCTS],
        sites=[
            *({"id": mill, "roles": ["warehouse"]} for mill in SUPPLY_TONS),
            *({"id": factory, "roles": ["ship_to"]} for factory in DEMAND_TONS),
        ],
        supply=[
            {"site": mill, "item": product, "quantity": str(tons)}
            for mill, row in SUPPLY_TONS.items()
            for product, tons in zip(PRODUCTS, row, strict=True)
        ],
        demand=[
            {
                "reference": f"{factory} {product}",
                "site": factory,
                "item": product,
                "quantity": str(tons),
            }
            for factory, row in DEMAND_TONS.items()
            for product, tons in zip(PRODUCTS, row, strict=True)
        ],
        lanes=[
            {"origin": mill, "destination": factory, "item": product, "unit_cost": str(cost)}
            for (mill, factory), row in COST_DOLLARS.items()
            for product, cost in zip(PRODUCTS, row, strict=True)
        ],
        rules=[
            {
                "rule": "shared_capacity",
                "id": f"{mill}-{factory}",
                "lanes": {"origin": [mill], "destination": [factory]},
                "maximum": str(joint),
                "per": "together",
            }
            for mill, factory in COST_DOLLARS
        ],
    )


def test_least_cost_equals_the_published_optimum() -> None:
    """All products share each way; the plan is proved to the dollar."""
    planned = plan_network(network(JOINT_TONS), shortages="forbid")

    assert planned.plan["method"] == "linear_program"
    assert planned.total_cost == PUBLISHED_COST
    assert planned.gap == 0
    assert planned.certificate["lexicographic"] == "proved"


def test_a_way_that_is_full_says_what_a_ton_more_would_save() -> None:
    """By the price of its rule the plan of a wider way costs no less than it promises."""
    planned = plan_network(network(JOINT_TONS), shortages="forbid")
    priced = [rule for rule in planned.plan["rules_in_force"] if "one_more" in rule]
    promised = sum(Fraction(row["cost"]) for rule in priced for row in rule["one_more"])

    wider = plan_network(network(JOINT_TONS + 1), shortages="forbid")

    assert promised < 0
    assert wider.total_cost >= PUBLISHED_COST + promised


def test_ways_that_are_too_narrow_leave_no_plan_and_the_reason_names_them() -> None:
    """2800 tons of coils and plate must come, but narrow ways cannot carry them."""
    planned = plan_network(network(200), shortages="forbid")

    assert planned.plan["status"] == "no_plan"
    reason = planned.plan["reason"]["together"][0]
    assert reason["rules"]
    assert "contradict each other" in reason["detail"]
