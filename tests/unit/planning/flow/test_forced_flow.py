"""Minimums that cannot be met are shown by a set of places; all others have a flow."""

from itertools import product

import numpy as np

from service.planning.flow.forced_flow import contradiction, maximum_flow
from service.planning.model.arcs import UNLIMITED
from tests.unit.planning.formal import arcs_of, random_arcs, simplex_cost


def test_set_says_what_must_leave_and_what_can_come_in() -> None:
    """500 must leave {1, 2}, 200 + 120 can come in: the arc between them changes nothing."""
    arcs = arcs_of(
        [(0, 1, 0, 200, 0), (0, 2, 0, 120, 0), (1, 2, 0, -1, 0), (2, 0, 500, 500, 0)],
    )

    found = contradiction(arcs, nodes=3)

    assert found is not None
    assert found[0].tolist() == [False, True, True]
    assert found[1:] == (500, 320)


def test_contradiction_is_found_exactly_where_no_circulation_exists() -> None:
    """Hoffman 1960, against every subset of the nodes, and against a solver that shares nothing."""
    rng = np.random.default_rng(8)
    none = 0
    for _ in range(120):
        arcs, nodes = random_arcs(rng, costs=3)

        found = contradiction(arcs, nodes=nodes)

        worst = 0
        for inside in product((False, True), repeat=nodes):
            within = np.array(inside)
            leaving = arcs.minimum[within[arcs.tail] & ~within[arcs.head]].sum()
            entering = arcs.capacity[~within[arcs.tail] & within[arcs.head]]
            if not (entering == UNLIMITED).any():
                worst = max(worst, int(leaving - entering.sum()))
        assert (found is None) == (worst == 0) == (simplex_cost(arcs, nodes=nodes) is not None)
        if found is not None:
            none += 1
            assert found[1] - found[2] == worst
    assert none > 20


def test_maximum_flow_tells_what_still_reaches_the_sink() -> None:
    """3 of 5 fit through the second arc; only the node behind it can still send."""
    tail, head = np.array([0, 1]), np.array([1, 2])

    flow, beyond = maximum_flow(tail, head, np.array([5, 3]), source=0, sink=2, nodes=3)

    assert flow.tolist() == [3, 3]
    assert beyond.tolist() == [False, False, True]


def test_maximum_flow_without_a_way_is_zero() -> None:
    """No arc leaves the source: nothing flows, and what could reach the sink is still told."""
    flow, beyond = maximum_flow(
        np.array([1]), np.array([2]), np.array([5]), source=0, sink=2, nodes=3
    )

    assert flow.tolist() == [0]
    assert beyond.tolist() == [False, True, True]
