"""Small formal networks for tests, written as rows of arcs."""

from collections.abc import Sequence

import networkx as nx
import numpy as np

from service.network.columns import IntArray
from service.planning.flow.prices import reduced_cost
from service.planning.model.arcs import UNLIMITED, Arcs, MoneyArray

Row = tuple[int, int, int, int, int]


def arcs_of(rows: Sequence[Row]) -> Arcs:
    """Return arcs from rows of (tail, head, minimum, capacity or -1, cost)."""
    tail, head, minimum, capacity, cost = ([row[at] for row in rows] for at in range(5))
    large = any(abs(money) >= 2**62 for money in cost)
    return Arcs(
        tail=np.array(tail, np.int64),
        head=np.array(head, np.int64),
        minimum=np.array(minimum, np.int64),
        capacity=np.array(capacity, np.int64),
        cost=np.array(cost, object if large else np.int64),
    )


def random_arcs(rng: np.random.Generator, *, costs: int) -> tuple[Arcs, int]:
    """Return a random network (feasible or not) without loops below zero, and its node count.

    Costs are at least 0 up to ``costs``, shifted by random potentials, so that single ones are
    negative and loops keep their cost.
    """
    nodes = int(rng.integers(3, 9))
    count = int(rng.integers(3, 20))
    potential = [int(rng.integers(0, 2**60)) * costs >> 60 for _ in range(nodes)]
    rows: list[Row] = []
    for _ in range(count):
        tail = int(rng.integers(0, nodes))
        head = (tail + int(rng.integers(1, nodes))) % nodes
        capacity = UNLIMITED if rng.random() < 0.5 else int(rng.integers(0, 9))
        minimum = int(rng.integers(0, 5)) if rng.random() < 0.25 else 0
        if capacity != UNLIMITED:
            minimum = min(minimum, capacity)
        cost = int(rng.integers(0, 7)) * costs // 7 + int(rng.integers(0, 3))
        rows.append((tail, head, minimum, capacity, cost + potential[tail] - potential[head]))
    return arcs_of(rows), nodes


def is_circulation(arcs: Arcs, flow: IntArray, *, nodes: int) -> bool:
    """Return whether ``flow`` keeps all bounds and as much enters every node as leaves it."""
    balance = [0] * nodes
    for tail, head, steps in zip(arcs.tail, arcs.head, flow.tolist(), strict=True):
        balance[head] += steps
        balance[tail] -= steps
    within = (arcs.minimum <= flow) & ((arcs.capacity == UNLIMITED) | (flow <= arcs.capacity))
    return bool(within.all()) and not any(balance)


def simplex_cost(arcs: Arcs, *, nodes: int) -> int | None:
    """Return the least cost by networkx' network simplex in Python ints; None without a flow."""
    graph = nx.MultiDiGraph()
    wanted = [0] * nodes
    base = 0
    for tail, head, minimum, capacity, cost in zip(
        arcs.tail.tolist(),
        arcs.head.tolist(),
        arcs.minimum.tolist(),
        arcs.capacity.tolist(),
        arcs.cost.tolist(),
        strict=True,
    ):
        wanted[head] -= minimum
        wanted[tail] += minimum
        base += minimum * cost
        room = {} if capacity == UNLIMITED else {"capacity": capacity - minimum}
        graph.add_edge(tail, head, weight=cost, **room)
    graph.add_nodes_from((node, {"demand": wanted[node]}) for node in range(nodes))
    try:
        cost, _ = nx.network_simplex(graph)
    except nx.NetworkXUnfeasible:
        return None
    return base + int(cost)


def cost_of(arcs: Arcs, flow: IntArray) -> int:
    """Return the cost of a flow in Python ints."""
    return sum(a * b for a, b in zip(arcs.cost.tolist(), flow.tolist(), strict=True))


def holds(arcs: Arcs, flow: IntArray, price: MoneyArray) -> bool:
    """Return whether ``price`` proves ``flow`` to be of least cost over all ``arcs``."""
    reduced = reduced_cost(arcs, price)
    return not bool(
        ((reduced < 0) & arcs.can_take_more(flow)).any()
        or ((reduced > 0) & arcs.can_give_up(flow)).any()
    )
