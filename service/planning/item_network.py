"""The formal network of one item, with everything that its arcs stand for."""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from service.network.columns import IntArray
from service.planning.arcs import Arcs, Kind, MoneyArray, largest, widened
from service.planning.bounds import LaneBounds
from service.planning.groups import IN_MONEY, Groups
from service.planning.layout import Layout
from service.planning.scaling import Rationals
from service.planning.stock import Stock


@dataclass(frozen=True, slots=True, kw_only=True)
class ItemNetwork:
    """The formal network of one item.

    ``arcs.cost`` is scaled money per step, ``money`` the same before scaling. ``kind`` (a
    ``Kind``) and ``subject`` say what each arc stands for; lanes come first, in the order of
    ``lanes.rows``, so that the position of a lane's arc is its position there. ``priorities`` are
    those that occur, ascending; ``base`` is C: the r-th of T priorities weighs (T + 1 - r) * C.
    """

    item: int
    lanes: LaneBounds
    stock: Stock
    groups: Groups
    layout: Layout
    arcs: Arcs
    money: Rationals
    kind: IntArray
    subject: IntArray
    priorities: tuple[int, ...]
    base: int

    @property
    def node_count(self) -> int:
        """Return the number of nodes, the root included."""
        return len(self.layout.nodes)

    def of_kind(self, *kinds: Kind) -> IntArray:
        """Return the positions of the arcs of some kinds, ascending."""
        return np.flatnonzero(np.isin(self.kind, [int(kind) for kind in kinds]))

    def weighted(self) -> MoneyArray:
        """Return what the solver minimises: money, and the weight of its priority a step short."""
        bound = largest(self.arcs.cost) + len(self.priorities) * self.base
        cost = widened(self.arcs.cost, bound=bound).copy()
        for arc, rank in self.ranked_shortages():
            cost[arc] += (len(self.priorities) - rank) * self.base
        return cost

    def ranked_shortages(self) -> Iterator[tuple[int, int]]:
        """Yield each shortage arc of a priority, with the priority's position in ``priorities``."""
        rank = {priority: at for at, priority in enumerate(self.priorities)}
        for kind, priority in (
            (Kind.SHORT, self.groups.priority),
            (Kind.KEEP_SHORT, self.stock.kept_priority),
        ):
            for arc in self.of_kind(kind).tolist():
                own = int(priority[self.subject[arc]])
                if own != IN_MONEY:
                    yield arc, rank[own]
