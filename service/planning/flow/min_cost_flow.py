"""Least-cost flow in whole steps by OR-Tools, behind guards that its own statuses do not give."""

import numpy as np
from ortools.graph.python import min_cost_flow as engine

from service.network.columns import IntArray
from service.planning.model.arcs import SAFE, UNLIMITED, Arcs, largest, total
from service.planning.model.limits import NoFlowError, NumbersTooLargeError, SolverFaultError


def cost_limit(nodes: int) -> int:
    """Return the largest |cost| that the solver surely takes with ``nodes`` nodes.

    The solver adds 2 nodes and scales costs by their number; at a tenth of its own bound it never
    refused (measured with ortools 9.15.6755, 2026-12-01), at the bound itself it mostly did.
    """
    return SAFE // (10 * (nodes + 3))


def node_balance(arcs: Arcs, flow: IntArray, *, nodes: int) -> IntArray:
    """Return what enters less what leaves each node, shape (nodes,).

    No overflow: callers bound the sum of all ``flow`` below 2**62.
    """
    balance = np.zeros(nodes, np.int64)
    used = np.flatnonzero(flow)
    np.add.at(balance, arcs.head[used], flow[used])
    np.subtract.at(balance, arcs.tail[used], flow[used])
    return balance


def least_cost_flow(
    arcs: Arcs, *, nodes: int, balance: IntArray | None = None, loops_below_zero: bool = False
) -> IntArray:
    """Return a flow of least cost, int64 of shape (arcs,), in steps.

    What enters less what leaves node v is ``balance[v]`` (default 0 everywhere: a circulation).
    Every |cost| is at most ``cost_limit(nodes)``. Minimums are removed by substitution. Without
    loops of negative cost some least-cost flow, less its minimums, is a sum of paths from nodes
    with too much to nodes with too little, so that no arc carries more than all of them together:
    that is the capacity the solver gets for an unlimited arc. With ``loops_below_zero`` (only on
    arcs with a capacity) such loops add at most the capacities of their negative arcs.

    Raises
    ------
    NoFlowError
        Minimums, capacities and balance contradict each other.
    NumbersTooLargeError
        The capacities of one node add up to 2**62 steps or more.
    SolverFaultError
        The solver refused or failed, which the guards make impossible.
    """
    if arcs.cost.dtype != np.int64 or largest(arcs.cost) > cost_limit(nodes):
        raise SolverFaultError("a cost outside the solver's range reached the solver")
    if total(arcs.minimum) >= SAFE:
        raise NumbersTooLargeError("The quantities that must move add up to 2^62 steps or more.")
    surplus = node_balance(arcs, arcs.minimum, nodes=nodes)
    if balance is not None:
        surplus -= balance
    most = total(surplus[surplus > 0])
    limited = arcs.capacity != UNLIMITED
    if loops_below_zero:
        below = limited & (arcs.cost < 0)
        most += total(arcs.capacity[below] - arcs.minimum[below])
    if most >= SAFE:
        raise NumbersTooLargeError("The quantities add up to 2^62 steps or more.")
    room = np.where(limited, np.minimum(arcs.capacity - arcs.minimum, most), most)
    movable = np.flatnonzero((room > 0) & (arcs.tail != arcs.head))
    flow = arcs.minimum.copy()
    if movable.shape[0] == 0 or (most == 0 and not loops_below_zero):
        if surplus.any():
            raise NoFlowError
        return flow
    room = _fitting(arcs.at(movable), room[movable], surplus, nodes=nodes)
    solver = engine.SimpleMinCostFlow()
    solver.add_arcs_with_capacity_and_unit_cost(
        arcs.tail[movable].astype(np.int32),
        arcs.head[movable].astype(np.int32),
        room,
        arcs.cost[movable],
    )
    # Positive: the node has goods to give. All nodes are named, so that none is left out.
    solver.set_nodes_supplies(np.arange(nodes, dtype=np.int32), surplus)
    status = solver.solve()
    # Reading a flow after UNBALANCED ends the process (google/or-tools issue 3947).
    if status == solver.INFEASIBLE:
        raise NoFlowError
    if status != solver.OPTIMAL:
        raise SolverFaultError(f"min-cost flow ended with status {status}")
    flow[movable] += np.asarray(solver.flows(np.arange(movable.shape[0], dtype=np.int32)), np.int64)
    return flow


def _fitting(arcs: Arcs, room: IntArray, surplus: IntArray, *, nodes: int) -> IntArray:
    """Return ``room`` cut to what can pass the ends of each arc.

    An arc carries at most what its tail can receive and has to give, and what its head can send on
    and is missing. No flow is lost, sums at the nodes come into range, and the solver is twice as
    fast on a million lanes as with one large number for all unlimited arcs.

    Raises ``NumbersTooLargeError`` where they do not come below 2**62.
    """
    most = int(room.max())
    received = _sums(arcs.head, room, nodes=nodes, most=most) + np.maximum(surplus, 0)
    sent = _sums(arcs.tail, room, nodes=nodes, most=most) + np.maximum(-surplus, 0)
    room = np.minimum(room, np.minimum(received[arcs.tail], sent[arcs.head]))
    if int(room.max()) * room.shape[0] + largest(surplus) < SAFE:
        return room
    for ends in (arcs.tail, arcs.head):
        sums = _sums(ends, room, nodes=nodes, most=SAFE)
        if bool((sums >= SAFE - np.abs(surplus)).any()):
            raise NumbersTooLargeError(
                "The capacities at one place add up to 2^62 steps or more; a larger item step "
                "or smaller capacities bring the network into range."
            )
    return room


def _sums(ends: IntArray, room: IntArray, *, nodes: int, most: int) -> IntArray:
    """Return the exact sum of ``room`` by end node, cut at ``most`` (which may be up to 2**62)."""
    if int(room.max()) * room.shape[0] < SAFE:
        sums = np.zeros(nodes, np.int64)
        np.add.at(sums, ends, room)
        return np.minimum(sums, most)
    # Halves of 31 bits: fewer than 2**31 of them add up below 2**62.
    low = np.zeros(nodes, np.int64)
    high = np.zeros(nodes, np.int64)
    np.add.at(low, ends, room & (2**31 - 1))
    np.add.at(high, ends, room >> 31)
    high += low >> 31
    low &= 2**31 - 1
    cut = high >= (most >> 31) + 1
    return np.where(cut, most, np.minimum((np.where(cut, 0, high) << 31) + low, most))
