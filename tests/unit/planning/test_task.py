"""The planning task: files in, files out, every answer proved, every failure with its reason."""

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
import orjson
import pytest

from service.network.columns import Network
from service.network.options import Options
from service.planning.task import Outcome, plan
from service.proof.check import Violation
from tests.factories import network_document, plan_network, take_in

TWO_SITES = ({"id": "W", "roles": ["warehouse"]}, {"id": "Y", "roles": ["ship_to"]})


def simple(quantity: str = "5", *, stock: str = "9", cost: str = "1") -> dict[str, Any]:
    """Return a network of one lane."""
    return network_document(
        sites=TWO_SITES,
        supply=[{"site": "W", "item": "GOODS", "quantity": stock}],
        demand=[{"reference": "A", "site": "Y", "item": "GOODS", "quantity": quantity}],
        lanes=[{"origin": "W", "destination": "Y", "unit_cost": cost}],
    )


def run(document: Mapping[str, Any], folder: Path, **arguments: Any) -> Outcome:  # noqa: ANN401 - those of plan
    """Take a network in and plan it in ``folder``."""
    report = take_in(orjson.dumps(document), folder, Options())
    assert report.status == "accepted", report.faults
    return plan(folder, Options(), folder, **arguments)


def test_phases_are_told_in_order(tmp_path: Path) -> None:
    """A door shows progress by these names; each has its seconds."""
    told: list[tuple[str, Mapping[str, int]]] = []

    outcome = run(simple(), tmp_path, progress=lambda phase, counts: told.append((phase, counts)))

    assert outcome.state == "planned"
    assert [phase for phase, _ in told] == ["read", "compiled", "solved", "written", "proved"]
    assert told[0][1] == {"lanes": 1, "order_lines": 1}
    assert list(outcome.seconds) == [phase for phase, _ in told]


def test_plan_whose_proof_fails_is_no_plan(tmp_path: Path) -> None:
    """A violation ends the run; both files stay for whoever looks into it."""

    def doubt(
        network: Network,
        options: Options,
        plan_document: Mapping[str, Any],
        certificate: Mapping[str, Any],
    ) -> tuple[Violation, ...]:
        assert len(network.lanes) == 1
        assert options == Options()
        assert plan_document["status"] == "planned"
        made_up = Violation(code="cost_differs", detail="made up", place=certificate["method"])
        return (made_up,) * 6

    told: dict[str, Mapping[str, int]] = {}
    outcome = run(simple(), tmp_path, prove=doubt, progress=told.__setitem__)

    assert (outcome.state, outcome.reason) == ("failed", "proof_failed")
    assert outcome.detail is not None
    assert "6 violations: cost_differs at min_cost_flow: made up; " in outcome.detail
    assert told["proved"] == {"violations": 6}
    assert (tmp_path / "plan.json").exists()
    assert (tmp_path / "certificate.json").exists()


def test_numbers_out_of_range_fail_by_name(tmp_path: Path) -> None:
    """3 x 10**18 bags in steps of 0.5 are more than 2**62 steps."""
    document = simple("3000000000000000000", stock="3000000000000000000")
    document["items"] = [{"id": "GOODS", "unit": "unit", "step": "0.5"}]

    outcome = run(document, tmp_path)

    assert (outcome.state, outcome.reason) == ("failed", "numbers_too_large")
    assert outcome.detail is not None
    assert "2^62" in outcome.detail


def test_costs_near_the_range_are_planned_exactly() -> None:
    """4 x 10**12 at six decimals: with the weights of nine priorities no solver takes them."""
    cost = "4000000000000.000001"
    document = network_document(
        sites=TWO_SITES,
        supply=[{"site": "W", "item": "GOODS", "quantity": "44"}],
        demand=[
            {
                "reference": str(priority),
                "site": "Y",
                "item": "GOODS",
                "quantity": "5",
                "priority": priority,
            }
            for priority in range(1, 10)
        ],
        lanes=[
            {"id": "dear", "origin": "W", "destination": "Y", "unit_cost": cost},
            {
                "id": "cheaper",
                "origin": "W",
                "destination": "Y",
                "item": "GOODS",
                "unit_cost": "4000000000000",
                "capacity": "40",
            },
        ],
    )

    planned = plan_network(document)

    assert planned.shipped() == {"dear GOODS": 4, "cheaper GOODS": 40}
    assert planned.plan["total_cost"] == "176000000000000.000004"
    assert [row["reference"] for row in planned.plan["shortages"]] == ["9"]


@pytest.mark.parametrize("seed", range(5))
def test_order_of_the_arrays_leaves_no_trace(seed: int) -> None:
    """Ties are many (all lanes cost the same), yet the plan is the same to the last byte."""
    rng = np.random.default_rng(seed)
    document = network_document(
        sites=[
            *({"id": f"W{n}", "roles": ["warehouse"]} for n in range(4)),
            *({"id": f"Y{n}", "roles": ["ship_to"]} for n in range(6)),
        ],
        supply=[{"site": f"W{n}", "item": "GOODS", "quantity": "6"} for n in range(4)],
        demand=[
            {
                "reference": f"A{n}",
                "site": f"Y{n}",
                "item": "GOODS",
                "quantity": "5",
                "priority": 1 + n % 2,
            }
            for n in range(6)
        ],
        lanes=[
            {"origin": f"W{a}", "destination": f"Y{b}", "unit_cost": "1"}
            for a in range(4)
            for b in range(6)
        ],
    )
    shuffled = {
        name: [value[at] for at in rng.permutation(len(value))]
        if isinstance(value, list)
        else value
        for name, value in document.items()
    }

    first, second = plan_network(document), plan_network(shuffled)

    assert first.network_digest == second.network_digest
    assert first.plan_bytes == second.plan_bytes


def test_item_that_nobody_wants_costs_nothing() -> None:
    """It has its own step of cost in the certificate, and no line in the plan."""
    document = simple()
    document["items"].append({"id": "IDLE", "unit": "unit"})

    planned = plan_network(document)

    assert {"item": "IDLE", "of": "cost", "achieved": "0", "bound": "0"} in (
        planned.certificate["steps"]
    )
    assert {line["item"] for line in planned.plan["plan_lines"]} == {"GOODS"}


def test_network_without_a_plan_says_why() -> None:
    """5 are wanted and must not be short, 3 are there: the set, both sums, the names."""
    planned = plan_network(simple(stock="3"), shortages="forbid")

    assert planned.plan["status"] == "no_plan"
    (reason,) = planned.plan["reason"]["items"]
    assert (reason["must_leave"], reason["can_enter"]) == ("5", "3")
    assert reason["places"] == ["W", "Y"]
    assert reason["detail"] == (
        "GOODS: order line A must take 5 unit out of W and Y, but only 3 can come in (stock at W)."
    )


def test_minimums_that_force_too_much_are_named() -> None:
    """Although shortages are allowed, 4 cannot leave where only 3 are."""
    document = simple(stock="3")
    document["lanes"][0] |= {"must_ship": "4", "per": "item"}

    planned = plan_network(document)

    assert planned.plan["status"] == "no_plan"
    detail = planned.plan["reason"]["detail"]
    assert detail == (
        "GOODS: lane W>Y must take 4 unit out of W, but only 3 can come in (stock at W)."
    )


def test_rules_say_whether_they_applied_and_bind() -> None:
    """An expired closure does not apply; a limit of 5 on what W sends is reached by 5, 6 is not."""
    document = simple()
    document["rules"] = [
        {"rule": "closure", "id": "OLD", "sites": {"ids": ["W"]}, "until": "2026-01-31"},
        *(
            {
                "rule": "throughput",
                "id": f"{flow} {most}",
                "sites": {"ids": ["W"]},
                "flow": flow,
                "maximum": most,
            }
            for flow, most in (("sent", "5"), ("through", "6"))
        ),
    ]

    rows = plan_network(document).plan["rules_in_force"]

    assert [(row["id"], row["applied"], row["binding"]) for row in rows] == [
        ("OLD", False, False),
        ("sent 5", True, True),
        ("through 6", True, False),
    ]
