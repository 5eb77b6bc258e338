"""Money in several currencies, and charges, mean what they come to in the currency of the plan."""

from fractions import Fraction
from random import Random

from hypothesis import given

from tests.factories import NetworkRefused, plan_network
from tests.random_money import RATES, in_other_money, of_one
from tests.random_networks import RandomNetwork
from tests.strategies import networks, randoms


@given(network=networks(), rng=randoms())
def test_a_plan_costs_what_its_conversion_costs(network: RandomNetwork, rng: Random) -> None:
    """The other side is a network in which the test has done the sums, in one currency."""
    stated, plain = in_other_money(network.document, rng)
    try:
        expected = plan_network(plain, **network.options)
    except NetworkRefused as refused:
        codes = {fault.code for fault in refused.report.faults}
        assert codes <= {"identical_lanes", "loop_below_zero"}
        return

    found = plan_network(stated, **network.options)

    assert found.plan["status"] == expected.plan["status"]
    assert found.plan["total_cost"] == expected.plan["total_cost"]
    assert found.certificate.get("steps") == expected.certificate.get("steps")


@given(network=networks(), rng=randoms())
def test_tables_of_money_add_up_to_the_parts_of_the_cost(
    network: RandomNetwork, rng: Random
) -> None:
    """Line by line, charge by charge, and currency by currency."""
    stated, _ = in_other_money(network.document, rng)
    try:
        plan = plan_network(stated, **network.options).plan
    except NetworkRefused:
        return
    if plan["status"] == "no_plan":
        assert "currencies" not in plan
        return

    lines = plan["plan_lines"]
    parts = [part for line in lines for part in line.get("charge_parts", ())]
    assert sum((Fraction(part["cost"]) for part in parts), Fraction(0)) == Fraction(
        plan["cost_parts"]["charges"]
    )
    by_currency = {row["currency"]: row for row in plan["currencies"]}
    for rate in RATES:
        code = rate["currency"]
        own = [line["stated"] for line in lines if line.get("stated", {}).get("currency") == code]
        paid = sum((Fraction(one["transport_cost"]) for one in own), Fraction(0))
        charged = sum(
            (Fraction(one["stated_cost"]) for one in parts if one.get("currency") == code),
            Fraction(0),
        )
        row = by_currency.get(code)
        if row is None:
            assert paid == charged == 0
            continue
        assert (Fraction(row["transport"]), Fraction(row["charges"])) == (paid, charged)
        total = sum(Fraction(row[part]) for part in ("supply", "transport", "charges"))
        assert Fraction(row["amount"]) == total
        assert Fraction(row["converted"]) == total * of_one(rate)
