"""Chains merged before a solve: a node that must pass everything on needs no place of its own."""

from dataclasses import dataclass

import numpy as np

from service.network.columns import BoolArray, IntArray
from service.planning.model.arcs import ROOT, UNLIMITED, Arcs, MoneyArray, largest, total, widened

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

    def arcs(self, cost: MoneyArray, *, at: IntArray | None = None) -> Arcs:
        """Return the arcs that are left, between merged places, at the shifted ``cost``.

        ``at`` picks some of them by their original positions, all of which are in ``kept``.
        """
        positions = self.kept if at is None else at
        offset = self.offsets(cost)
        cost = cost[positions]
        bound = largest(cost) + 2 * largest(offset)
        cost = widened(cost, bound=bound)
        offset = widened(offset, bound=bound)
        tail, head = self.original.tail[positions], self.original.head[positions]
        return Arcs(
            tail=self.place[tail],
            head=self.place[head],
            minimum=self.original.minimum[positions],
            capacity=self.original.capacity[positions],
            cost=cost + offset[tail] - offset[head],
        )

    def flow(self, kept_flow: IntArray, *, at: IntArray | None = None) -> IntArray:
        """Return the flow on all original arcs, from that on the arcs that are left.

        With ``at`` only those at these original positions carry anything.
        """
        positions = self.kept if at is None else at
        flow = np.zeros(len(self.original), np.int64)
        flow[positions] = kept_flow
        balance = np.zeros(self.place.shape[0], np.int64)
        used = positions[kept_flow != 0]
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


def contract(arcs: Arcs, *, nodes: int, lanes: int = 0) -> Contraction:
    """Merge every node with one way out, or one way in, that has no limit and no minimum.

    All flow is at least 0, so what such an arc carries follows from the rest and meets its bounds
    by itself. The root stays. Loops on a merged node stay as arcs; the solver leaves them out.
    The first ``lanes`` arcs are looked at as columns: one of many lanes out of its tail and of many
    into its head is never merged over, and counts even where it becomes a loop.
    """
    tail, head, free, original = _mergeable(arcs, nodes=nodes, lanes=lanes)
    place = np.arange(nodes + 1, dtype=np.int64)
    left = np.ones(tail.shape[0], np.bool_)
    rounds: list[Round] = []
    idle = 0
    while idle < 2 and len(rounds) < ROUNDS_MAX:
        onward = (len(rounds) + idle) % 2 == 0
        found = _round(tail, head, place=place, left=left, free=free, onward=onward)
        if found is None:
            idle += 1
            continue
        idle = 0
        merged, arc, target = found
        rounds.append(
            Round(
                merged=merged,
                arc=original[arc],
                onward=onward,
                before=place[:nodes],
                target=target,
            )
        )
        left[arc] = False
        step_to = np.arange(nodes + 1, dtype=np.int64)
        step_to[merged] = target
        place = step_to[place]
    place = place[:nodes]
    standing = np.zeros(nodes, np.bool_)
    standing[place] = True
    kept = np.ones(len(arcs), np.bool_)
    for step in rounds:
        kept[step.arc] = False
    return Contraction(
        original=arcs,
        rounds=tuple(rounds),
        nodes=int(standing.sum()),
        place=(np.cumsum(standing) - 1)[place],
        kept=np.flatnonzero(kept),
    )


def _mergeable(
    arcs: Arcs, *, nodes: int, lanes: int
) -> tuple[IntArray, IntArray, BoolArray, IntArray]:
    """Return tail, head, freedom and position of the arcs that decide what can be merged.

    Node ``nodes`` stands for everywhere: two arcs from it, or to it, stand for the lanes of a node
    that are left out, of which there are two or more.
    """
    ways_out = np.bincount(arcs.tail[:lanes], minlength=nodes)
    ways_in = np.bincount(arcs.head[:lanes], minlength=nodes)
    lone = np.zeros(0, np.int64)
    if (ways_out == 1).any() or (ways_in == 1).any():
        lone = np.flatnonzero(
            (ways_out == 1)[arcs.tail[:lanes]] | (ways_in == 1)[arcs.head[:lanes]]
        )
    from_many, to_many = np.flatnonzero(ways_in > 1), np.flatnonzero(ways_out > 1)
    positions = np.concatenate((lone, np.arange(lanes, len(arcs))))
    many = 2 * (from_many.shape[0] + to_many.shape[0])
    everywhere = np.full(many, nodes)
    split = 2 * from_many.shape[0]
    tail = np.concatenate((arcs.tail[positions], everywhere[:split], to_many, to_many))
    head = np.concatenate((arcs.head[positions], from_many, from_many, everywhere[split:]))
    free = (arcs.capacity[positions] == UNLIMITED) & (arcs.minimum[positions] == 0)
    none = np.zeros(many, np.int64)
    return (
        tail.astype(np.int64),
        head.astype(np.int64),
        np.concatenate((free, none.astype(np.bool_))),
        np.concatenate((positions, none - 1)),
    )


def _round(  # noqa: PLR0913 - arcs are columns
    tail: IntArray,
    head: IntArray,
    *,
    place: IntArray,
    left: BoolArray,
    free: BoolArray,
    onward: bool,
) -> tuple[IntArray, IntArray, IntArray] | None:
    """Return the merges possible now over ways out (``onward``) or in, None where there is none.

    What is merged, over which arcs, and into what.
    """
    near, far = (tail, head) if onward else (head, tail)
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
    return near[lone], lone, far[lone]
