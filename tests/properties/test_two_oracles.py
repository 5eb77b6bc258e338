"""Every plan against two independent solvers: the same cost, the same shortages by priority."""

from fractions import Fraction

from hypothesis import given

from tests.factories import plan_network
from tests.judging import achieved, outcomes, shortages_listed
from tests.oracles import by_linear_programs, by_network_simplex
from tests.random_networks import RandomNetwork
from tests.strategies import networks


@given(network=networks())
def test_cost_and_shortages_equal_those_of_two_solvers(network: RandomNetwork) -> None:
    """The service weighs priorities in one solve; both judges serve them one after the other.

    ``plan_network`` has the certificate checked too, so that three ways agree, and for a network
    without a plan its cut.
    """
    planned = plan_network(network.document, **network.options)

    own = outcomes(achieved(planned))
    for judge in (by_linear_programs, by_network_simplex):
        answers = outcomes(judge(network.document, **network.options))
        if planned.outcome.state == "no_plan":
            # Every cut is of an item without a plan; of the other items nothing is said.
            cuts = planned.certificate["cuts"]
            assert cuts
            assert all(answers[cut["item"]] is None for cut in cuts)
        else:
            assert own == answers


@given(network=networks())
def test_plan_lists_what_its_certificate_states(network: RandomNetwork) -> None:
    """Totals, shortages and money of the plan's tables add up to the steps of the certificate."""
    planned = plan_network(network.document, **(network.options | {"shortages": "allow"}))

    answers = [answer for answer in achieved(planned).values() if answer is not None]
    assert sum((answer.cost for answer in answers), Fraction(0)) == planned.total_cost
    assert planned.gap == 0
    assert shortages_listed(planned) == {
        (answer.item, priority): short
        for answer in answers
        for priority, short in answer.shortages.items()
        if short
    }
