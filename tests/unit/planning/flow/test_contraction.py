"""Chains are merged before a solve and come back with their flow and prices."""

import numpy as np

from service.planning.flow.contraction import contract
from service.planning.flow.prices import residual_prices
from service.planning.flow.ranges import exact_flow
from service.planning.model.limits import NoFlowError
from tests.unit.planning.formal import (
    arcs_of,
    cost_of,
    holds,
    is_circulation,
    random_arcs,
    simplex_cost,
)


def test_chain_merges_into_one_place_and_carries_its_cost() -> None:
    """0->1->2->3->0: nodes 1 to 3 have one unlimited way on each; what is left costs 1+2+3."""
    arcs = arcs_of([(0, 1, 0, 5, 1), (1, 2, 0, -1, 2), (2, 3, 0, -1, 3), (3, 0, 4, 4, 0)])

    whole = contract(arcs, nodes=4)
    left = whole.arcs(arcs.cost)

    assert whole.nodes == 2
    assert whole.kept.tolist() == [0, 3]
    assert left.cost.sum() == 6
    assert whole.flow(np.array([4, 4], np.int64)).tolist() == [4, 4, 4, 4]


def test_limits_and_minimums_are_never_merged_over() -> None:
    """A node whose way on has a capacity or a minimum keeps its place."""
    limited = arcs_of([(0, 1, 0, 5, 1), (1, 0, 0, 4, 2)])
    forced = arcs_of([(0, 1, 0, 5, 1), (1, 0, 1, -1, 2)])

    assert contract(limited, nodes=2).nodes == 2
    assert contract(forced, nodes=2).nodes == 2


def test_ring_of_merging_nodes_is_left_alone() -> None:
    """1->2->1 could merge either way; a ring has no end to merge into."""
    arcs = arcs_of([(1, 2, 0, -1, 1), (2, 1, 0, -1, 1), (0, 0, 0, -1, 0)])

    whole = contract(arcs, nodes=3)

    assert whole.flow(np.zeros(whole.kept.shape[0], np.int64)).tolist() == [0, 0, 0]


def test_flow_and_prices_of_the_original_follow_from_the_contracted_optimum() -> None:
    """On random networks: same cost as an independent solve, bounds kept, prices prove it."""
    rng = np.random.default_rng(3)
    merged = 0
    for _ in range(80):
        arcs, nodes = random_arcs(rng, costs=40)
        whole = contract(arcs, nodes=nodes)
        left = whole.arcs(arcs.cost)
        try:
            kept = exact_flow(left, nodes=whole.nodes)
        except NoFlowError:
            assert simplex_cost(arcs, nodes=nodes) is None
            continue

        flow = whole.flow(kept)
        prices = whole.prices(residual_prices(left, kept, nodes=whole.nodes), arcs.cost)

        merged += nodes - whole.nodes
        assert is_circulation(arcs, flow, nodes=nodes)
        assert cost_of(arcs, flow) == simplex_cost(arcs, nodes=nodes)
        assert holds(arcs, flow, prices)
    assert merged > 20
