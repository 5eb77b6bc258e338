"""What is drawn, moved, served, kept and left adds up, and every limit holds, read off the plan."""

from collections import defaultdict
from fractions import Fraction

from hypothesis import given

from tests.factories import Document, Planned, plan_network
from tests.oracle_problem import ItemProblem
from tests.oracle_reading import exact, read_items
from tests.random_networks import RandomNetwork
from tests.strategies import networks

Totals = dict[tuple[str, str], Fraction]


def planned_with_shortages(network: RandomNetwork) -> Planned:
    """Plan with shortages allowed, so that there is a plan to read."""
    planned = plan_network(network.document, **(network.options | {"shortages": "allow"}))
    assert planned.outcome.state == "planned"
    return planned


def totals(planned: Planned) -> dict[str, Totals]:
    """Return what is sent, received, served and drawn, by site and item."""
    sums: dict[str, Totals] = {
        name: defaultdict(Fraction) for name in ("sent", "received", "served", "drawn")
    }
    for line in planned.plan["plan_lines"]:
        if line["lane"] is not None:
            quantity = Fraction(line["quantity"])
            sums["sent"][line["origin"], line["item"]] += quantity
            sums["received"][line["destination"], line["item"]] += quantity
    for line in planned.plan["order_lines"]:
        sums["served"][line["site"], line["item"]] += Fraction(line["served"])
    for use in planned.plan["site_use"]:
        sums["drawn"][use["site"], use["item"]] += Fraction(use["shipped"])
    return sums


@given(network=networks())
def test_flow_is_conserved_everywhere(network: RandomNetwork) -> None:
    """Received and drawn is sent and served; what is there is drawn, kept or left."""
    planned = planned_with_shortages(network)

    sums = totals(planned)
    for place in set().union(*sums.values()):
        entering = sums["received"][place] + sums["drawn"][place]
        assert entering == sums["sent"][place] + sums["served"][place], place
    for use in planned.plan["site_use"]:
        parts = (Fraction(use[name]) for name in ("shipped", "kept", "left"))
        assert sum(parts) == Fraction(use["available"])
        assert all(Fraction(use[name]) >= 0 for name in ("shipped", "kept", "left"))


@given(network=networks())
def test_what_a_place_that_is_no_cross_dock_sends_is_its_own_stock(
    network: RandomNetwork,
) -> None:
    """What arrives at a warehouse or a ship-to must not leave it again."""
    planned = planned_with_shortages(network)

    docks = {s["id"] for s in network.document["sites"] if "cross_dock" in s["roles"]}
    sums = totals(planned)
    for (site, item), sent in sums["sent"].items():
        assert site in docks or sent <= sums["drawn"][site, item]


@given(network=networks())
def test_every_limit_holds(network: RandomNetwork) -> None:
    """Must-ships, capacities, fixed quantities, closures and throughput, in whole steps."""
    planned = planned_with_shortages(network)

    sums = totals(planned)
    for problem in read_items(network.document, network.options):
        check_lanes(problem, planned, network.document)
        for (site, flow), most in problem.limits.items():
            place = (site, problem.item)
            passed = {
                "sent": sums["sent"][place],
                "received": sums["received"][place],
                "through": sums["sent"][place] + sums["served"][place],
            }[flow]
            assert passed <= most * problem.step
        for site in problem.closed:
            assert sums["served"][site, problem.item] == 0
            assert sums["sent"][site, problem.item] == 0


def check_lanes(problem: ItemProblem, planned: Planned, document: Document) -> None:
    """Assert that each lane with an id carries whole steps between its least and its most."""
    carried = {
        line["lane"]: Fraction(line["quantity"])
        for line in planned.plan["plan_lines"]
        if line["item"] == problem.item
    }
    for lane in problem.lanes:
        name = document["lanes"][lane.row].get("id")
        if name is not None:
            steps = carried.get(name, Fraction(0)) / problem.step
            assert steps.denominator == 1
            assert steps >= lane.least
            assert lane.most is None or steps <= lane.most


@given(network=networks())
def test_money_adds_up_to_the_total(network: RandomNetwork) -> None:
    """Lines add up to the total less shortage, parts to lines, rates times flow to parts."""
    planned = planned_with_shortages(network)

    plan = planned.plan
    parts = {name: Fraction(value) for name, value in plan["cost_parts"].items()}
    assert sum(parts.values()) == planned.total_cost
    for name in ("supply", "handling", "transport"):
        assert parts[name] == sum(Fraction(line[f"{name}_cost"]) for line in plan["plan_lines"])
    assert sum(Fraction(line["cost"]) for line in plan["plan_lines"]) == (
        planned.total_cost - parts["shortage"]
    )
    handling = transport = Fraction(0)
    sums = totals(planned)
    carried = {
        (line["lane"], line["item"]): Fraction(line["quantity"]) for line in plan["plan_lines"]
    }
    for problem in read_items(network.document, network.options):
        for site in problem.sites:
            place = (site, problem.item)
            passed = sums["sent"][place] + sums["served"][place]
            handling += problem.handling[site] * passed / problem.step
        for lane in problem.lanes:
            name = network.document["lanes"][lane.row].get("id")
            if name is not None:
                steps = carried.get((name, problem.item), Fraction(0)) / problem.step
                transport += lane.cost * steps
    named = {lane["id"] for lane in network.document["lanes"] if "id" in lane}
    assert parts["handling"] == handling
    assert transport == sum(
        Fraction(line["transport_cost"]) for line in plan["plan_lines"] if line["lane"] in named
    )


@given(network=networks())
def test_each_order_line_is_served_and_short_by_what_it_wants(network: RandomNetwork) -> None:
    """Every line sent is listed, served and short add up to it, in whole steps."""
    planned = planned_with_shortages(network)

    listed = {line["reference"]: line for line in planned.plan["order_lines"]}
    wanted = {
        line.reference: line.steps * problem.step
        for problem in read_items(network.document, network.options)
        for line in problem.lines
    }
    assert set(listed) == {row["reference"] for row in network.document["demand"]}
    for reference, quantity in wanted.items():
        line = listed[reference]
        assert exact(line["served"]) + exact(line["short"]) == exact(line["quantity"]) == quantity
