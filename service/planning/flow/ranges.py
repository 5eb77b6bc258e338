"""Least-cost flow for costs of any size: passes over shifted costs that fix arcs for good."""

import numpy as np

from service.network.columns import BoolArray, IntArray
from service.planning.flow.min_cost_flow import cost_limit, least_cost_flow
from service.planning.flow.prices import reduced_cost, residual_prices, shortest_distances
from service.planning.model.arcs import Arcs, MoneyArray, largest, narrowed


def exact_flow(arcs: Arcs, *, nodes: int) -> IntArray:
    """Return a circulation of least cost, int64 of shape (arcs,), whatever the size of the costs.

    Costs in the solver's range go to it as they are. Others are solved by passes. A pass solves
    for reduced costs shifted right by s bits, without their last bits; under the prices of its
    optimum every residual arc then has an exact reduced cost above -2**s. An arc whose own
    exceeds nodes * 2**s in size can never change its flow again: a loop through it has at most
    nodes - 1 other arcs and so would cost more than 0 (arcs are fixed like this for
    epsilon-optimal flows by Goldberg and Tarjan; Ahuja, Magnanti and Orlin 1993, section 10.3).
    It is fixed, and the next pass has only reduced costs up to nodes * 2**s to deal with, until
    s is 0.

    Raises what ``least_cost_flow`` raises.
    """
    limit = cost_limit(nodes)
    cost = narrowed(arcs.cost)
    if cost.dtype == np.int64 and largest(cost) <= limit:
        return least_cost_flow(arcs.with_cost(cost), nodes=nodes)
    # Loops of unlimited arcs must not fall below zero when bits are cut off, so the first costs
    # are reduced ones, none of them negative: no loop of the network is below zero, and arcs with
    # a fixed flow (what is wanted) do not count.
    fixed: BoolArray = arcs.capacity == arcs.minimum
    price: MoneyArray = np.zeros(nodes, object)
    if bool((arcs.cost[~fixed] < 0).any()):
        free = arcs.at(~fixed)
        price += shortest_distances(free.tail, free.head, free.cost, nodes=nodes)
    flow = arcs.minimum
    while True:
        reduced = reduced_cost(arcs, price)
        shift = _shift(largest(reduced[~fixed]), limit=limit)
        short = np.where(fixed, 0, reduced >> shift).astype(np.int64)
        cut = arcs.fixed_at(flow, fixed).with_cost(short)
        flow = least_cost_flow(cut, nodes=nodes, loops_below_zero=True)
        if shift == 0:
            return flow
        free = cut.at(~fixed)
        price = price + (residual_prices(free, flow[~fixed], nodes=nodes).astype(object) << shift)
        size = np.abs(reduced_cost(arcs, price))
        newly = ~fixed & (size > nodes << shift)
        fixed = fixed | newly


def _shift(size: int, *, limit: int) -> int:
    """Return the least number of bits to cut off so that ``size`` is at most ``limit``."""
    shift = 0
    # Cutting bits off a negative number rounds its size up, hence one less.
    while size >> shift > limit - 1:
        shift += 1
    return shift
