"""Prices are shortest distances in the residual network, exact at every size."""

import numpy as np
import pytest

from service.planning.flow.prices import residual_prices, shortest_distances
from service.planning.model.limits import SolverFaultError
from tests.unit.planning.formal import arcs_of, holds


def test_prices_are_the_cheapest_way_from_the_root() -> None:
    """Two used ways of 1+2 and 5 to node 2: it costs 5 there, for the cheaper way is full."""
    arcs = arcs_of([(0, 1, 0, 3, 1), (1, 2, 0, -1, 2), (0, 2, 0, -1, 5), (2, 0, 4, 4, 0)])
    flow = np.array([3, 3, 1, 4], np.int64)

    price = residual_prices(arcs, flow, nodes=3)

    # Node 1: what it gave to node 2 at 2 it can have back at 5 - 2.
    assert price.tolist() == [0, 3, 5]
    assert holds(arcs, flow, price)


def test_a_dearer_flow_has_no_prices() -> None:
    """A flow that is not of least cost leaves a loop below zero, and no prices hold for it."""
    arcs = arcs_of([(0, 1, 0, -1, 1), (0, 1, 0, -1, 2), (1, 0, 1, 1, 0)])
    dear = np.array([0, 1, 1], np.int64)

    with pytest.raises(SolverFaultError):
        residual_prices(arcs, dear, nodes=2)
    assert not holds(arcs, dear, np.array([0, 1], np.int64))
    assert not holds(arcs, dear, np.array([0, 2], np.int64))


def test_distances_do_not_wrap() -> None:
    """Ten arcs of -2**61 add up beyond 64 bits and are still exact."""
    nodes = 11
    steps = np.arange(10, dtype=np.int64)

    found = shortest_distances(steps, steps + 1, np.full(10, -(2**61), np.int64), nodes=nodes)

    assert found.tolist() == [-(2**61) * node for node in range(nodes)]


def test_no_arcs_leave_all_distances_at_zero() -> None:
    """An empty residual network reaches nothing."""
    nothing = np.zeros(0, np.int64)

    assert shortest_distances(nothing, nothing, nothing, nodes=3).tolist() == [0, 0, 0]
