"""The formal network of one item, with everything that its arcs stand for."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.network.columns import CodeArray, IntArray
from service.planning.model.arcs import SAFE, Arcs, Kind, MoneyArray, largest, widened
from service.planning.model.bounds import LaneBounds
from service.planning.model.groups import IN_MONEY, Groups
from service.planning.model.layout import Layout
from service.planning.model.stock import Stock


def with_weight(cost: MoneyArray, weight: IntArray, base: int) -> MoneyArray:
    """Return ``cost`` plus ``weight`` times ``base`` on each arc."""
    if not base:
        return cost
    bound = largest(cost) + largest(weight) * base
    wide: MoneyArray = weight.astype(object) if bound >= SAFE else weight
    counted: MoneyArray = widened(cost, bound=bound) + wide * base
    return counted


@dataclass(frozen=True, slots=True, kw_only=True)
class ItemNetwork:
    """The formal network of one item.

    ``arcs.cost`` is scaled money per step. ``kind`` (a ``Kind``) and ``subject`` say what each arc
    stands for; lanes come first, in the order of ``lanes.rows``, so that the position of a lane's
    arc is its position there. ``priorities`` are those that occur, ascending; ``base`` is C: the
    r-th of T priorities weighs (T + 1 - r) * C. ``days_late`` says how late goods on an arc are;
    where that costs no money it has a ``late_weight``, each of which weighs ``late_base`` (0 where
    nothing has a weight).
    """

    item: int
    lanes: LaneBounds
    stock: Stock
    groups: Groups
    layout: Layout
    arcs: Arcs
    kind: NDArray[np.int8]
    subject: CodeArray
    priorities: tuple[int, ...]
    base: int
    days_late: IntArray
    late_weight: IntArray
    late_base: int

    @property
    def node_count(self) -> int:
        """Return the number of nodes, the root included."""
        return len(self.layout.nodes)

    def of_kind(self, *kinds: Kind) -> IntArray:
        """Return the positions of the arcs of some kinds, ascending."""
        # Lanes come first and are by far the most: the others are looked at without them.
        lanes = self.lanes.rows.shape[0]
        others = lanes + np.flatnonzero(np.isin(self.kind[lanes:], [int(kind) for kind in kinds]))
        return np.concatenate((np.arange(lanes), others)) if Kind.LANE in kinds else others

    def weighted(self) -> MoneyArray:
        """Return what the solver minimises: money, and the weights of lateness and shortage."""
        money = with_weight(self.arcs.cost, self.late_weight, self.late_base)
        bound = largest(money) + len(self.priorities) * self.base
        cost = widened(money, bound=bound).copy()
        arcs, ranks = self.ranked_shortages()
        if arcs.shape[0]:
            # Only here is the base within the bound: without priorities it may be beyond int64.
            cost[arcs] += (len(self.priorities) - ranks).astype(cost.dtype) * self.base
        return cost

    def ranked_shortages(self) -> tuple[IntArray, IntArray]:
        """Return the shortage arcs of priorities, and each one's position in ``priorities``."""
        parts = []
        for kind, priority in (
            (Kind.SHORT, self.groups.priority),
            (Kind.KEEP_SHORT, self.stock.kept_priority),
        ):
            arcs = self.of_kind(kind)
            own = priority[self.subject[arcs]]
            ranked = own != IN_MONEY
            ranks = np.searchsorted(np.array(self.priorities, np.int64), own[ranked])
            parts.append((arcs[ranked], ranks))
        return np.concatenate([part[0] for part in parts]), np.concatenate(
            [part[1] for part in parts]
        )
