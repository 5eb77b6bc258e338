"""Plans by freight tariffs against a formulation written once more, and what they must keep."""

import copy
from fractions import Fraction
from random import Random

from hypothesis import given

from tests.factories import NetworkRefused, plan_network
from tests.judging import achieved, outcomes
from tests.oracle_programs import solve_programs
from tests.oracle_reading import read_items
from tests.oracles import by_linear_programs
from tests.random_dates import with_dates
from tests.random_networks import RandomNetwork
from tests.random_tariffs import (
    CUT_OFF_DAY,
    as_costs,
    by_tariffs,
    measured,
    of_several_days,
    shipment_costs,
    with_segments,
)
from tests.strategies import networks, randoms


@given(network=networks(), rng=randoms())
def test_plans_by_tariffs_cost_what_linear_programs_find(
    network: RandomNetwork, rng: Random
) -> None:
    """The judge has one lane for each price of a step, and knows neither breaks nor bases."""
    stated = by_tariffs(network.document, rng)
    shortages = network.options.get("shortages", "allow") == "allow"

    planned = plan_network(stated, **network.options)

    answers = {
        problem.item: solve_programs(with_segments(problem, stated), shortages=shortages)
        for problem in read_items(as_costs(stated), network.options)
    }
    own, judged = outcomes(achieved(planned)), outcomes(answers)
    if planned.outcome.state == "no_plan":
        assert all(judged[cut["item"]] is None for cut in planned.certificate["cuts"])
    else:
        assert own == judged


@given(network=networks(), rng=randoms())
def test_every_shipment_costs_what_its_tariff_asks_for(network: RandomNetwork, rng: Random) -> None:
    """Line by line and consignment by consignment, priced by the tests' own way."""
    stated = by_tariffs(network.document, rng, share=0.9)
    plan = plan_network(stated, **network.options).plan

    lanes = {lane["id"]: lane for lane in stated["lanes"] if "id" in lane}
    tariffs = {tariff["id"]: tariff for tariff in stated["tariffs"]}
    items = {item["id"]: item for item in stated["items"]}
    freight: dict[str, Fraction] = {}
    for line in plan["plan_lines"]:
        tariff = tariffs.get(lanes.get(line["lane"], {}).get("tariff"))
        if tariff is None:
            continue
        quantity = Fraction(line["quantity"])
        cost = shipment_costs(tariff, measured(tariff, items[line["item"]], quantity))
        assert Fraction(line["transport_cost"]) == cost
        assert Fraction(line["unit_cost"]) * quantity == cost
        freight[line["lane"]] = freight.get(line["lane"], Fraction(0)) + cost
    bills = {row["lane"]: row for row in plan["consignments"] if "freight" in row}
    assert set(bills) == set(freight)
    for name, row in bills.items():
        assert Fraction(row["freight"]["cost"]) == freight[name] == Fraction(row["cost"])
        base = sum((Fraction(part["amount"]) for part in row["freight"]["parts"]), Fraction(0))
        more = 1 + Fraction(row["freight"]["surcharge_percent"]) / 100
        assert base * more == Fraction(row["freight"]["amount"])


@given(network=networks(), rng=randoms())
def test_the_order_in_which_tariffs_and_lanes_are_sent_changes_nothing(
    network: RandomNetwork, rng: Random
) -> None:
    """Equal plans are told apart by names alone, also where a lane has several prices."""
    stated = by_tariffs(network.document, rng)
    other = copy.deepcopy(stated)
    for table in ("tariffs", "lanes", "sites", "items", "supply", "demand"):
        # Order lines and lanes without an id are called by their number or order.
        if all("id" in row or "reference" in row for row in other[table]):
            rng.shuffle(other[table])

    first = plan_network(stated, **network.options)
    second = plan_network(other, **network.options)

    assert first.network_digest == second.network_digest
    assert first.plan["plan_lines"] == second.plan["plan_lines"]
    assert first.certificate == second.certificate


@given(network=networks(), rng=randoms())
def test_a_tariff_of_one_rate_is_a_unit_cost(network: RandomNetwork, rng: Random) -> None:
    """One break, nothing that bends it: the plan costs what it cost before."""
    stated = copy.deepcopy(network.document)
    stated["tariffs"] = []
    for number, lane in enumerate(stated["lanes"]):
        costs = Fraction(lane["unit_cost"])
        if lane.get("measure", "unit") != "unit" or costs < 0 or rng.random() < 0.3:
            continue
        rate = lane.pop("unit_cost")
        lane.setdefault("id", f"lane {number}")
        lane["tariff"] = f"T{number}"
        stated["tariffs"].append(
            {"id": f"T{number}", "basis": "unit", "breaks": [{"from": "0", "rate": rate}]}
        )

    planned = plan_network(stated, **network.options)

    if planned.outcome.state != "no_plan":
        answers = by_linear_programs(network.document, **network.options)
        assert outcomes(achieved(planned)) == outcomes(answers)


@given(network=networks(), rng=randoms())
def test_what_leaves_on_a_day_pays_the_tariff_of_that_day(
    network: RandomNetwork, rng: Random
) -> None:
    """Several departures of a lane are several shipments, each by the version that holds then."""
    stated = with_dates(of_several_days(network.document, rng), rng)
    try:
        plan = plan_network(stated, **network.options).plan
    except NetworkRefused:
        # A minimum over several days is not built yet.
        return

    lanes = {lane["id"]: lane for lane in stated["lanes"] if "id" in lane}
    items = {item["id"]: item for item in stated["items"]}
    for line in plan["plan_lines"]:
        name = lanes.get(line["lane"], {}).get("tariff")
        day = line.get("departs", CUT_OFF_DAY)
        held = [
            tariff
            for tariff in stated["tariffs"]
            if tariff["id"] == name
            and tariff.get("valid_from", "") <= day <= tariff.get("valid_until", "9999")
        ]
        if name is not None:
            (tariff,) = held
            quantity = Fraction(line["quantity"])
            cost = shipment_costs(tariff, measured(tariff, items[line["item"]], quantity))
            assert Fraction(line["transport_cost"]) == cost
