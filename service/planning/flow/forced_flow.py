"""Whether minimums and capacities leave any flow at all, and the set of places where they do not.

A circulation exists unless for some set X of nodes more must leave X than can enter it (Hoffman
1960). Maximum flow finds either the one or the other.
"""

import numpy as np
from ortools.graph.python import max_flow as engine

from service.network.columns import BoolArray, IntArray
from service.planning.flow.min_cost_flow import node_balance
from service.planning.model.arcs import SAFE, UNLIMITED, Arcs, total
from service.planning.model.limits import NumbersTooLargeError, SolverFaultError


def contradiction(arcs: Arcs, *, nodes: int) -> tuple[BoolArray, int, int] | None:
    """Return the least set X that no flow can satisfy, or None where a circulation exists.

    X is a mask of shape (nodes,), with the sum of minimums on arcs that leave it and the (smaller)
    sum of capacities of arcs that enter it, in steps. Of all sets that miss by most it is the one
    contained in all others, so that it does not depend on how it was found.
    """
    surplus = node_balance(arcs, arcs.minimum, nodes=nodes)
    given = np.flatnonzero(surplus > 0)
    taken = np.flatnonzero(surplus < 0)
    most = total(surplus[given])
    if most == 0:
        return None
    room = np.where(
        arcs.capacity == UNLIMITED, most, np.minimum(arcs.capacity - arcs.minimum, most)
    )
    source, sink = nodes, nodes + 1
    flow, beyond = maximum_flow(
        np.concatenate((arcs.tail, np.full(given.shape[0], source), taken)),
        np.concatenate((arcs.head, given, np.full(taken.shape[0], sink))),
        np.concatenate((room, surplus[given], -surplus[taken])),
        source=source,
        sink=sink,
        nodes=nodes + 2,
    )
    if total(flow[len(arcs) : len(arcs) + given.shape[0]]) == most:
        return None
    places = beyond[:nodes]
    leaving = places[arcs.tail] & ~places[arcs.head]
    entering = ~places[arcs.tail] & places[arcs.head]
    if bool((arcs.capacity[entering] == UNLIMITED).any()):
        raise SolverFaultError("an unlimited arc enters the set of a contradiction")
    return places, total(arcs.minimum[leaving]), total(arcs.capacity[entering])


def maximum_flow(  # noqa: PLR0913 - a graph is its columns
    tail: IntArray, head: IntArray, room: IntArray, *, source: int, sink: int, nodes: int
) -> tuple[IntArray, BoolArray]:
    """Return a maximum flow by arc, and which nodes can still reach the sink.

    ``room`` is at least 0 everywhere; the total that leaves the source stays below 2**62.
    """
    if total(room[tail == source]) >= SAFE:
        raise NumbersTooLargeError("The quantities add up to 2^62 steps or more.")
    flow = np.zeros(tail.shape[0], np.int64)
    used = np.flatnonzero((room > 0) & (tail != head))
    beyond = np.zeros(nodes, np.bool_)
    beyond[sink] = True
    if not (tail[used] == source).any() or not (head[used] == sink).any():
        reachable_back(tail[used], head[used], beyond)
        return flow, beyond
    solver = engine.SimpleMaxFlow()
    solver.add_arcs_with_capacity(
        tail[used].astype(np.int32), head[used].astype(np.int32), room[used]
    )
    status = solver.solve(source, sink)
    if status != solver.OPTIMAL:
        raise SolverFaultError(f"maximum flow ended with status {status}")
    flow[used] = solver.flows(np.arange(used.shape[0], dtype=np.int32))
    more = room > flow
    less = flow > 0
    reachable_back(
        np.concatenate((tail[more], head[less])), np.concatenate((head[more], tail[less])), beyond
    )
    return flow, beyond


def reachable_back(tail: IntArray, head: IntArray, marked: BoolArray) -> None:
    """Mark, in place, every node from which a marked one can be reached."""
    while True:
        fresh = tail[marked[head] & ~marked[tail]]
        if fresh.shape[0] == 0:
            return
        marked[fresh] = True
