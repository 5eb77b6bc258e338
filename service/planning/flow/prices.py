"""Node prices that prove a least-cost flow: shortest distances in what is left to move."""

import numpy as np

from service.network.columns import IntArray
from service.planning.model.arcs import ROOT, Arcs, MoneyArray, largest, narrowed, widened
from service.planning.model.limits import SolverFaultError


def reduced_cost(arcs: Arcs, price: MoneyArray) -> MoneyArray:
    """Return cost + price at the tail - price at the head, exactly, of shape (arcs,)."""
    bound = largest(arcs.cost) + 2 * largest(price)
    cost = widened(arcs.cost, bound=bound)
    wide = widened(price, bound=bound)
    return cost + wide[arcs.tail] - wide[arcs.head]


def residual_prices(arcs: Arcs, flow: IntArray, *, nodes: int) -> MoneyArray:
    """Return prices under which no residual arc has a negative reduced cost, shape (nodes,).

    The price of a node is its shortest distance, in the residual network of ``flow``, from a
    further node joined to every node at cost 0 (Bellman-Ford in the form of array sweeps; Ahuja,
    Magnanti and Orlin 1993, sections 5.4 and 9.2), less that of the root. They are a function of
    network and flow alone.

    Raises
    ------
    SolverFaultError
        The flow is not of least cost: a residual loop below zero exists.
    """
    more = np.flatnonzero(arcs.can_take_more(flow))
    less = np.flatnonzero(arcs.can_give_up(flow))
    distance = shortest_distances(
        np.concatenate((arcs.tail[more], arcs.head[less])),
        np.concatenate((arcs.head[more], arcs.tail[less])),
        np.concatenate((arcs.cost[more], -arcs.cost[less])),
        nodes=nodes,
    )
    price: MoneyArray = distance - distance[ROOT]
    return price


def shortest_distances(
    tail: IntArray,
    head: IntArray,
    cost: MoneyArray,
    *,
    nodes: int,
    start: MoneyArray | None = None,
) -> MoneyArray:
    """Return the least of 0 and the cost of any walk ending at each node, shape (nodes,).

    ``start`` are the distances over some of the arcs, if they are known; they save sweeps.

    Raises
    ------
    SolverFaultError
        Walks of any low cost exist: there is a loop below zero.
    """
    # Distances stay within nodes * |cost|; the first round past that many would prove a loop.
    cost = narrowed(cost)
    cost = widened(cost, bound=(nodes + 1) * largest(cost))
    distance: MoneyArray = np.zeros(nodes, cost.dtype)
    if start is not None:
        distance += start
    if tail.shape[0] == 0:
        return distance
    # int32 keys sort by radix, and the sorted columns stay small enough for the cache.
    order = np.argsort(head.astype(np.int32), kind="stable")
    tail = tail[order].astype(np.int32)
    cost = cost[order]
    ends = head[order]
    starts = np.flatnonzero(np.concatenate(([True], ends[1:] != ends[:-1])))
    reached = ends[starts]
    for _ in range(nodes + 1):
        nearer = np.minimum(np.minimum.reduceat(distance[tail] + cost, starts), distance[reached])
        if np.array_equal(nearer, distance[reached]):
            return distance
        distance[reached] = nearer
    raise SolverFaultError("a loop below zero is left in what the solver called a least-cost flow")
