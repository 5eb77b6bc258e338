"""Eles, *Tutorial for Operations Research: Modeling in GNU MathProg*, University of Pannonia.

The chapter on transportation, increasing rates: what goes beyond 100 units on a lane costs a
quarter more. Status A: data and optimum seen in the tutorial's attachments with their solver logs.
"""

from fractions import Fraction

from tests.factories import plan_network, transportation_network
from tests.published.test_eles_tutorial import COST, DEMAND, SUPPLY

FROM_UNITS = "100"
DEARER_BY = Fraction("1.25")
PUBLISHED_COST = Fraction("2772.5")


def test_least_cost_by_rising_rates_equals_the_published_optimum() -> None:
    """Each lane has a tariff of its own: two breaks, each for what lies beyond it."""
    network = transportation_network(SUPPLY, DEMAND, COST)
    network["tariffs"] = []
    for lane in network["lanes"]:
        rate = Fraction(lane.pop("unit_cost"))
        dearer = str(float(rate * DEARER_BY))
        lane["tariff"] = f"T{lane['id']}"
        network["tariffs"].append(
            {
                "id": lane["tariff"],
                "basis": "unit",
                "break_type": "incremental",
                "breaks": [
                    {"from": "0", "rate": str(rate)},
                    {"from": FROM_UNITS, "rate": dearer},
                ],
            }
        )

    planned = plan_network(network, shortages="forbid")

    assert planned.total_cost == PUBLISHED_COST
    assert planned.gap == 0
