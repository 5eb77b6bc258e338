"""Costs of any size are solved exactly, by passes that fix arcs for good."""

import numpy as np
import pytest

from service.planning.flow.contraction import contract
from service.planning.flow.min_cost_flow import cost_limit
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


@pytest.mark.parametrize("bits", [58, 70, 130])
def test_passes_reach_the_exact_optimum(bits: int) -> None:
    """Costs of 58 to 130 bits, whose last bits differ, against a simplex in Python ints."""
    rng = np.random.default_rng(bits)
    solvable = 0
    for _ in range(30):
        arcs, nodes = random_arcs(rng, costs=2**bits)
        expected = simplex_cost(arcs, nodes=nodes)
        if expected is None:
            with pytest.raises(NoFlowError):
                exact_flow(arcs, nodes=nodes)
            continue

        flow = exact_flow(arcs, nodes=nodes)

        solvable += 1
        assert is_circulation(arcs, flow, nodes=nodes)
        assert cost_of(arcs, flow) == expected
        assert holds(arcs, flow, residual_prices(arcs, flow, nodes=nodes))
    assert solvable > 8


def test_costs_that_differ_only_in_the_bits_cut_off_are_told_apart() -> None:
    """Of two ways that agree in all but the last bit the cheaper is taken, at every size."""
    for size in (10, cost_limit(2), cost_limit(2) * 10**6, 10**40):
        arcs = arcs_of([(0, 1, 3, 3, 0), (1, 0, 0, -1, size + 1), (1, 0, 0, 2, size)])

        assert exact_flow(arcs, nodes=2).tolist() == [3, 1, 2]


def test_loops_of_no_cost_stay_so_when_bits_are_cut_off() -> None:
    """Rounding 3 and -3 down by one bit gives 1 and -2, a loop below zero that is none."""
    odd = 3 * cost_limit(3) // 2 * 2 + 3
    arcs = arcs_of([(0, 1, 0, -1, odd), (1, 0, 0, -1, -odd), (1, 2, 5, 5, 0), (2, 1, 0, -1, 7)])

    flow = exact_flow(arcs, nodes=3)

    assert is_circulation(arcs, flow, nodes=3)
    assert cost_of(arcs, flow) == 35


def test_passes_work_on_contracted_networks_too() -> None:
    """Contraction shifts costs; the optimum of the original network is reached all the same."""
    rng = np.random.default_rng(5)
    for _ in range(20):
        arcs, nodes = random_arcs(rng, costs=2**90)
        expected = simplex_cost(arcs, nodes=nodes)
        if expected is None:
            continue
        whole = contract(arcs, nodes=nodes)

        flow = whole.flow(exact_flow(whole.arcs(arcs.cost), nodes=whole.nodes))

        assert cost_of(arcs, flow) == expected
