"""Networks that once broke the pipeline, each the smallest that did; two solvers judge them."""

from typing import Any

import pytest

from tests.factories import Document, network_document, plan_network
from tests.judging import achieved, outcomes
from tests.oracles import by_linear_programs, by_network_simplex

WAREHOUSE = {"id": "W", "roles": ["warehouse"]}
SHIP_TO = {"id": "S", "roles": ["ship_to"]}


def forced_loop() -> Document:
    """Return goods that a forced lane between cross-docks wants, and nobody else.

    The lanes that bring them there carry any item; the proof once did not know that they may.
    """
    return network_document(
        sites=[
            WAREHOUSE,
            {"id": "C", "roles": ["cross_dock"]},
            {"id": "D", "roles": ["cross_dock"]},
        ],
        supply=[{"site": "W", "item": "GOODS", "quantity": "3"}],
        demand=[],
        lanes=[
            {"origin": "W", "destination": "C", "unit_cost": "8"},
            {"origin": "C", "destination": "D", "unit_cost": "1"},
            {
                "origin": "D",
                "destination": "C",
                "unit_cost": "4",
                "item": "GOODS",
                "must_ship": "3",
            },
        ],
    )


def far_beyond_64_bits(**claim: Any) -> Document:  # noqa: ANN401 - fields of an order line
    """Return one line of goods with costs so far apart that weights leave 64 bits."""
    line = {"reference": "D", "site": "S", "item": "GOODS", "quantity": "1"}
    return network_document(
        sites=[WAREHOUSE, SHIP_TO],
        supply=[
            {"site": "W", "item": "GOODS", "quantity": "1", "unit_cost": "4000000000000.000001"}
        ],
        demand=[line | claim],
        lanes=[{"origin": "W", "destination": "S", "unit_cost": "0.000001"}],
    )


@pytest.mark.parametrize(
    "document",
    [
        pytest.param(forced_loop(), id="goods that only a forced lane wants"),
        pytest.param(far_beyond_64_bits(shortage_cost="4500000000000.000001"), id="money alone"),
        pytest.param(far_beyond_64_bits(priority=1), id="a priority above such money"),
    ],
)
def test_network_is_planned_as_two_solvers_would(document: Document) -> None:
    """Cost and shortages are theirs, and the certificate is accepted."""
    planned = plan_network(document)

    own = outcomes(achieved(planned))
    assert own == outcomes(by_network_simplex(document))
    # Amounts beyond 2**53 are no numbers of a solver in floating point.
    if planned.total_cost < 2**40:
        assert own == outcomes(by_linear_programs(document))


def limited(flow: str, site: str, **tables: list[dict[str, Any]]) -> Document:
    """Return a network with a limit on all that passes a place in two ways."""
    rule = {"rule": "throughput", "id": "R", "sites": {"ids": [site]}, "flow": flow, "maximum": "1"}
    return network_document(supply=[], rules=[rule], **{"demand": [], "lanes": [], **tables})  # type: ignore[arg-type] # tables by name


@pytest.mark.parametrize(
    "document",
    [
        pytest.param(
            limited(
                "through",
                "X",
                sites=[WAREHOUSE, {"id": "X", "roles": ["ship_to", "warehouse"]}, SHIP_TO],
                lanes=[
                    {"origin": "W", "destination": "X", "unit_cost": "1", "item": "GOODS"},
                    {"origin": "X", "destination": "S", "unit_cost": "1", "item": "GOODS"},
                ],
            ),
            id="what arrives may not leave, what leaves is not there",
        ),
        pytest.param(
            limited(
                "sent",
                "X",
                sites=[WAREHOUSE, {"id": "X", "roles": ["cross_dock", "ship_to"]}],
                demand=[{"site": "X", "item": "GOODS", "quantity": "1", "origins": ["W"]}],
            ),
            id="a line at a cross-dock says whose stock may serve it",
        ),
    ],
)
def test_limit_on_goods_that_are_kept_apart_is_planned(document: Document) -> None:
    """No one arc carries all that passes there; the proof and the plan must still agree."""
    assert plan_network(document).plan["status"] == "planned"
