"""Plans of items that share limits against HiGHS, which sees the same limits written otherwise."""

import json
from collections import defaultdict
from fractions import Fraction

from hypothesis import given, settings

from service.proof import standalone
from tests.evidence.zips import packed
from tests.factories import Planned, plan_network
from tests.oracle_sharing import SharingJudge
from tests.random_networks import RandomNetwork
from tests.strategies import sharing_networks


def shortages(planned: Planned, judge: SharingJudge) -> dict[int, Fraction]:
    """Return what is short by priority, in the measure in which shortages are added up."""
    short: dict[int, Fraction] = defaultdict(Fraction)
    for row in planned.plan["shortages"]:
        if row["priority"] is not None:
            quantity = Fraction(row["quantity"])
            short[row["priority"]] += judge.short_in_measure(row["item"], quantity)
    return short


@given(network=sharing_networks())
@settings(max_examples=40)
def test_no_plan_of_whole_steps_is_better_than_its_bound(network: RandomNetwork) -> None:
    """The best plan that HiGHS finds lies between the bound and the cost; shortage goes first.

    The judge goes priority by priority, with what the plan achieved as the cap of the next.
    """
    planned = plan_network(network.document, **network.options)
    judge = SharingJudge(network.document, network.options)

    if planned.plan["status"] == "no_plan":
        assert judge.least_cost({}) is None
        return
    short = shortages(planned, judge)
    caps: dict[int, Fraction] = {}
    for priority in judge.priorities() if network.options.get("shortages") != "forbid" else ():
        best = judge.least_short(priority, caps)
        assert best is not None
        assert best <= short[priority]
        if planned.certificate["lexicographic"] == "proved":
            assert best == short[priority]
        caps[priority] = short[priority]
    cost = judge.least_cost(caps)
    assert cost is not None
    assert Fraction(planned.certificate["lower_bound"]) <= cost <= planned.total_cost


@given(network=sharing_networks())
@settings(max_examples=20)
def test_the_second_verifier_finds_every_plan_proved(network: RandomNetwork) -> None:
    """It was written separately and knows no solver, no NumPy and none of the service."""
    planned = plan_network(network.document, **network.options)

    data = packed(
        planned.network,
        planned.options,
        planned.plan_bytes,
        json.dumps(planned.certificate).encode(),
    )

    assert standalone.verify(data) == ("intact", [])


@given(network=sharing_networks())
@settings(max_examples=15)
def test_the_order_of_what_is_sent_changes_no_plan(network: RandomNetwork) -> None:
    """Equal input, however it is ordered, gives the same bytes."""
    turned = {
        key: value[::-1] if isinstance(value, list) else value
        for key, value in network.document.items()
    }

    first, second = (plan_network(one, **network.options) for one in (network.document, turned))

    # Warnings name the places of what was sent.
    assert {**first.plan, "warnings": []} == {**second.plan, "warnings": []}
    assert first.certificate == second.certificate
