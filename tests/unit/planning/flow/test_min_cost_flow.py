"""The guarded solver: minimums by substitution, ranges before the call, status before values."""

import numpy as np
import pytest

from service.planning.flow.min_cost_flow import cost_limit, least_cost_flow
from service.planning.model.limits import NoFlowError, NumbersTooLargeError, SolverFaultError
from tests.unit.planning.formal import arcs_of, cost_of, is_circulation, random_arcs, simplex_cost


def test_flow_is_of_least_cost_on_random_networks() -> None:
    """The cost equals that of an independent network simplex; both agree where there is none."""
    rng = np.random.default_rng(11)
    solvable = 0
    for _ in range(60):
        arcs, nodes = random_arcs(rng, costs=50)
        expected = simplex_cost(arcs, nodes=nodes)
        if expected is None:
            with pytest.raises(NoFlowError):
                least_cost_flow(arcs, nodes=nodes)
            continue

        flow = least_cost_flow(arcs, nodes=nodes)

        solvable += 1
        assert is_circulation(arcs, flow, nodes=nodes)
        assert cost_of(arcs, flow) == expected
    assert solvable > 20


def test_minimum_that_nobody_wants_goes_round() -> None:
    """A minimum of 4 on 1->2 comes back over the cheaper of two ways, which takes only 3."""
    arcs = arcs_of([(1, 2, 4, -1, 1), (2, 1, 0, 3, 1), (2, 1, 0, -1, 5), (0, 1, 0, -1, 0)])

    flow = least_cost_flow(arcs, nodes=3)

    assert flow.tolist() == [4, 3, 1, 0]


def test_balance_is_what_stays_at_a_node() -> None:
    """Two steps leave node 0 and stay at node 2, over the arc that is cheaper."""
    arcs = arcs_of([(0, 1, 0, -1, 1), (1, 2, 0, -1, 1), (0, 2, 0, -1, 3)])

    flow = least_cost_flow(arcs, nodes=3, balance=np.array([-2, 0, 2], np.int64))

    assert flow.tolist() == [2, 2, 0]


def test_zero_capacity_carries_nothing_and_no_arcs_carry_no_flow() -> None:
    """Capacity 0 is a limit, not an absent one."""
    closed = arcs_of([(0, 1, 0, 0, -5), (1, 0, 0, -1, 0)])

    assert least_cost_flow(closed, nodes=2).tolist() == [0, 0]
    assert least_cost_flow(arcs_of([]), nodes=1).tolist() == []


def test_what_cannot_come_back_is_no_flow() -> None:
    """A minimum into a dead end has no flow, whether or not another arc could move."""
    with pytest.raises(NoFlowError):
        least_cost_flow(arcs_of([(0, 1, 2, -1, 0)]), nodes=2)
    with pytest.raises(NoFlowError):
        least_cost_flow(arcs_of([(0, 1, 2, 2, 0), (1, 0, 0, 1, 0)]), nodes=2)


def test_costs_beyond_the_range_never_reach_the_solver() -> None:
    """The largest cost allowed is solved; one more is our own mistake, not a wrong answer."""
    limit = cost_limit(2)
    arcs = arcs_of([(0, 1, 1, 1, limit), (1, 0, 0, -1, -limit)])

    assert least_cost_flow(arcs, nodes=2).tolist() == [1, 1]
    with pytest.raises(SolverFaultError):
        least_cost_flow(arcs.with_cost(arcs.cost + 1), nodes=2)


def test_unlimited_arcs_add_up_to_no_more_than_can_pass() -> None:
    """40 demands of 2**55: as large as all together, the 40 unlimited arcs would pass 2**62."""
    much = 2**55
    wants = [(node, 0, much, much, 0) for node in range(1, 41)]
    arcs = arcs_of([*wants, *[(0, node, 0, -1, node) for node in range(1, 41)]])

    flow = least_cost_flow(arcs, nodes=41)

    assert flow.tolist() == [much] * 80


def test_quantities_beyond_the_range_are_refused_by_name() -> None:
    """Where capacities of one place really add up to 2**62, nothing is solved."""
    much = 2**61
    arcs = arcs_of([(1, 0, much, much, 0), (2, 0, much, much, 0), (0, 1, 0, -1, 0)])

    with pytest.raises(NumbersTooLargeError, match=r"2\^62"):
        least_cost_flow(arcs, nodes=3)
