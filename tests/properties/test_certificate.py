"""A certificate accepts the plan it came with and no dearer one, however consistent that looks."""

import copy
from fractions import Fraction
from random import Random
from typing import Any

from hypothesis import assume, given
from hypothesis import strategies as st

from service.proof.check import check
from tests.factories import Document, Planned, network_document, plan_network
from tests.oracle_reading import exact, read_items
from tests.random_networks import RandomNetwork
from tests.random_witness import plain_text
from tests.strategies import networks, randoms


def with_dearer_twins(network: RandomNetwork) -> tuple[Document, dict[str, str]]:
    """Return the network with a dearer lane beside each one that has an id and unlimited room.

    Also returns the twin of each such lane, by id.
    """
    problems = read_items(network.document, network.options)
    limited = {lane.row for problem in problems for lane in problem.lanes if lane.most is not None}
    document: Document = copy.deepcopy(network.document)
    twins = {}
    for row, lane in enumerate(network.document["lanes"]):
        if "id" in lane and row not in limited:
            cost = plain_text(exact(lane["unit_cost"]) + 1, decimals=6)
            twin = {name: lane[name] for name in lane if name not in {"must_ship", "per", "tags"}}
            twin |= {"id": f"{lane['id']} dearer", "unit_cost": cost}
            twin.pop("carrier", None)
            twins[lane["id"]] = twin["id"]
            document["lanes"].append(twin)
    return document, twins


def shifted(planned: Planned, line: dict[str, Any], twin: str, step: Fraction) -> dict[str, Any]:
    """Return the plan with one step of a plan line moved to the twin of its lane."""
    plan: dict[str, Any] = copy.deepcopy(dict(planned.plan))
    old = next(
        row
        for row in plan["plan_lines"]
        if (row["lane"], row["item"]) == (line["lane"], line["item"])
    )
    moved = copy.deepcopy(old) | {"lane": twin, "quantity": plain_text(step, decimals=6)}
    rest = Fraction(old["quantity"]) - step
    if rest:
        old["quantity"] = plain_text(rest, decimals=6)
    else:
        plan["plan_lines"].remove(old)
    plan["plan_lines"].append(moved)
    plan["plan_lines"].sort(
        key=lambda row: tuple(
            (row[name] or "").encode() for name in ("origin", "destination", "item", "lane")
        )
    )
    return plan


@given(network=networks(), rng=randoms())
def test_one_step_on_a_dearer_lane_is_not_optimal(network: RandomNetwork, rng: Random) -> None:
    """Prices that prove the plan contradict every plan that costs more."""
    document, twins = with_dearer_twins(network)
    planned = plan_network(document, **(network.options | {"shortages": "allow"}))
    # A lane without an id may be called as a twin's original is, but then it has no twin.
    lines = [line for line in planned.plan["plan_lines"] if line["lane"] in twins]
    assume(lines)
    line = rng.choice(lines)
    step = next(item.step for item in planned.network.items if item.id == line["item"])

    dearer = shifted(planned, line, twins[line["lane"]], step)
    violations = check(planned.network, planned.options, dearer, planned.certificate)

    assert "not_optimal" in {violation.code for violation in violations}


@given(
    wanted=st.integers(min_value=1, max_value=1000),
    cheap=st.integers(min_value=0, max_value=1000),
    dearer=st.integers(min_value=1, max_value=1000),
)
def test_a_dearer_plan_is_refused_although_all_of_it_is_consistent(
    wanted: int, cheap: int, dearer: int
) -> None:
    """Totals, tables, steps and bounds all tell the same lie; only the prices cannot."""
    planned = plan_network(
        network_document(
            sites=[{"id": "W", "roles": ["warehouse"]}, {"id": "S", "roles": ["ship_to"]}],
            supply=[{"site": "W", "item": "GOODS", "quantity": wanted}],
            demand=[{"reference": "D", "site": "S", "item": "GOODS", "quantity": wanted}],
            lanes=[
                {"id": "A", "origin": "W", "destination": "S", "unit_cost": cheap},
                {"id": "B", "origin": "W", "destination": "S", "unit_cost": cheap + dearer},
            ],
        )
    )
    total = str(wanted * cheap + dearer)
    split = [("A", wanted - 1, cheap), ("B", 1, cheap + dearer)]
    shares = [(lane, quantity, quantity * cost) for lane, quantity, cost in split if quantity]

    plan: dict[str, Any] = copy.deepcopy(dict(planned.plan))
    certificate: dict[str, Any] = copy.deepcopy(dict(planned.certificate))
    (line,), (own,), (consignment,) = (
        plan[table] for table in ("plan_lines", "order_lines", "consignments")
    )
    (source,) = own["sources"]
    plan["plan_lines"] = [
        line
        | {"lane": lane, "quantity": str(quantity), "unit_cost": str(cost // quantity)}
        | {"transport_cost": str(cost), "cost": str(cost)}
        for lane, quantity, cost in shares
    ]
    own["sources"] = [
        source | {"quantity": str(quantity), "legs": [{"lane": lane}]}
        for lane, quantity, _ in shares
    ]
    plan["consignments"] = [
        consignment | {"lane": lane, "cost": str(cost)} for lane, _, cost in shares
    ]
    plan |= {"total_cost": total, "total_cost_rounded": f"{total}.00"}
    plan["cost_parts"]["transport"] = total
    plan["certificate"]["lower_bound"] = total
    certificate |= {"total_cost": total, "lower_bound": total}
    for step in certificate["steps"]:
        if step["of"] == "cost":
            step |= {"achieved": total, "bound": total}
    violations = check(planned.network, planned.options, plan, certificate)

    assert {violation.code for violation in violations} == {"not_optimal"}
