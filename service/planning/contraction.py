"""Chains merged before a solve: a node that must pass everything on needs no place of its own."""

from dataclasses import dataclass

import numpy as np

from service.network.columns import BoolArray, IntArray
from service.planning.arcs import ROOT, UNLIMITED, Arcs, MoneyArray, largest, total, widened

# A round merges every node that can be merged into one that stays. Three suffice for the chain
# received, in, out, sent; more only shorten long chains of cross-docks, which is no duty.
ROUNDS_MAX = 12


@dataclass(frozen=True, slots=True, kw_only=True)
class Round:
    """Merges that do not depend on each other.

    ``merged`` are representatives that are merged here, ``arc`` the arc that each is merged over
    and ``onward`` whether that arc leaves it (its only way out) or enters it (its only way in).
    ``before`` is the representative of every node before this round.
    """

    merged: IntArray
    arc: IntArray
    onward: bool
    before: IntArray
    target: IntArray


@dataclass(frozen=True, slots=True, kw_only=True)
class Contraction:
    """What became of a network whose chains were merged.

    ``nodes`` is the number of nodes left, the root at 0; ``place`` the one that each original node
    became, shape (original nodes,); ``kept`` the positions of the arcs that are left.
    """

    original: Arcs
    rounds: tuple[Round, ...]
    nodes: int
    place: IntArray
    kept: IntArray

    def offsets(self, cost: MoneyArray) -> MoneyArray:
        """Return what to add to the price of a merged place to get that of each original node.

        With these, the arcs that were merged over have a reduced cost of exactly 0.
        """
        node_count = self.place.shape[0]
        moved_by = sum(total(np.abs(cost[step.arc])) for step in self.rounds)
        cost = widened(cost, bound=4 * moved_by)
        offset: MoneyArray = np.zeros(node_count, cost.dtype)
        for step in self.rounds:
            tail, head = self.original.tail[step.arc], self.original.head[step.arc]
            # cost + price(tail) - price(head) = 0 gives the price of the merged representative
            # in terms of that of its target.
            moved: MoneyArray = np.zeros(node_count, cost.dtype)
            ahead = offset[head] - offset[tail] - cost[step.arc]
            moved[step.merged] = ahead if step.onward else -ahead
            offset = offset + moved[step.before]
        return offset

    def arcs(self, cost: MoneyArray) -> Arcs:
        """Return the arcs that are left, between merged places, at the shifted ``cost``."""
        offset = self.offsets(cost)
        bound = largest(cost) + 2 * largest(offset)
        cost = widened(cost[self.kept], bound=bound)
        offset = widened(offset, bound=bound)
        tail, head = self.original.tail[self.kept], self.original.head[self.kept]
        return Arcs(
            tail=self.place[tail],
            head=self.place[head],
            minimum=self.original.minimum[self.kept],
            capacity=self.original.capacity[self.kept],
            cost=cost + offset[tail] - offset[head],
        )

    def flow(self, kept_flow: IntArray) -> IntArray:
        """Return the flow on all original arcs, from that on the arcs that are left."""
        flow = np.zeros(len(self.original), np.int64)
        flow[self.kept] = kept_flow
        balance = np.zeros(self.place.shape[0], np.int64)
        used = self.kept[kept_flow != 0]
        np.add.at(balance, self.original.head[used], flow[used])
        np.subtract.at(balance, self.original.tail[used], flow[used])
        # Latest first: what a representative was merged over carries what else enters and leaves
        # the nodes that it then stood for.
        for step in reversed(self.rounds):
            gathered = np.zeros(balance.shape[0], np.int64)
            np.add.at(gathered, step.before, balance)
            carried = gathered[step.merged] if step.onward else -gathered[step.merged]
            flow[step.arc] = carried
            np.add.at(balance, self.original.head[step.arc], carried)
            np.subtract.at(balance, self.original.tail[step.arc], carried)
        return flow

    def prices(self, kept_price: MoneyArray, cost: MoneyArray) -> MoneyArray:
        """Return the price of every original node, from those of the merged places."""
        offset = self.offsets(cost)
        bound = largest(kept_price) + largest(offset)
        return widened(kept_price, bound=bound)[self.place] + widened(offset, bound=bound)


def contract(arcs: Arcs, *, nodes: int) -> Contraction:
    """Merge every node with one way out, or one way in, that has no limit and no minimum.

    All flow is at least 0, so what such an arc carries follows from the rest and meets its bounds
    by itself. The root stays. Loops on a merged node stay as arcs; the solver leaves them out.
    """
    place = np.arange(nodes, dtype=np.int64)
    left = np.ones(len(arcs), np.bool_)
    free = (arcs.capacity == UNLIMITED) & (arcs.minimum == 0)
    rounds: list[Round] = []
    idle = 0
    while idle < 2 and len(rounds) < ROUNDS_MAX:
        onward = (len(rounds) + idle) % 2 == 0
        step = _round(arcs, place=place, left=left, free=free, onward=onward)
        if step is None:
            idle += 1
            continue
        idle = 0
        rounds.append(step)
        left[step.arc] = False
        step_to = np.arange(nodes, dtype=np.int64)
        step_to[step.merged] = step.target
        place = step_to[place]
    standing = np.unique(place)
    return Contraction(
        original=arcs,
        rounds=tuple(rounds),
        nodes=int(standing.shape[0]),
        place=np.searchsorted(standing, place),
        kept=np.flatnonzero(left),
    )


def _round(
    arcs: Arcs, *, place: IntArray, left: BoolArray, free: BoolArray, onward: bool
) -> Round | None:
    """Return the merges possible now over ways out (``onward``) or in, None where there is none."""
    near, far = (arcs.tail, arcs.head) if onward else (arcs.head, arcs.tail)
    near, far = place[near], place[far]
    outer = left & (near != far)
    ways = np.bincount(near[outer], minlength=place.shape[0])
    lone = np.flatnonzero(outer & free & (ways[near] == 1) & (near != ROOT))
    candidate = np.zeros(place.shape[0], np.bool_)
    candidate[near[lone]] = True
    # Towards a candidate: its own merge comes first (or, in a ring of candidates, never).
    lone = lone[~candidate[far[lone]]]
    if lone.shape[0] == 0:
        return None
    return Round(merged=near[lone], arc=lone, onward=onward, before=place, target=far[lone])
