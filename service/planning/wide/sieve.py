"""The lanes of one item and what surrounds them, laid out for sifting."""

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from service.network.columns import IntArray
from service.planning.flow.contraction import Contraction
from service.planning.model.arcs import SAFE, Arcs, Kind, MoneyArray, largest
from service.planning.model.item_network import ItemNetwork
from service.planning.wide.lane_blocks import LaneBlocks, lane_blocks
from service.planning.wide.places import Places
from service.planning.wide.shortlist import Shortlist, Solved

# Prices are sums of at most as many costs as there are places; three of them are added up.
PRICE_MAX = SAFE >> 3


@dataclass(frozen=True, slots=True, kw_only=True)
class Better:
    """Lanes that would lower the cost, by how much a step, and whether some are ``listed`` already.

    The latter happens where the prices of a solve could not move as far as they should have.
    """

    lanes: IntArray
    reduced: IntArray
    listed: bool


class Sieve:
    """One item, contracted: its lanes by where they end, all other arcs between places."""

    def __init__(self, own: ItemNetwork, contraction: Contraction, weighted: MoneyArray) -> None:
        """Lay out the lanes; ``weighted`` is what each arc costs the solver, as int64."""
        self.lane_count = own.lanes.rows.shape[0]
        self.contraction = contraction
        self.arcs: Arcs = own.arcs.with_cost(weighted)
        first = int(np.searchsorted(contraction.kept, self.lane_count))
        self.core_at: IntArray = contraction.kept[first:]
        self.blocks: LaneBlocks = lane_blocks(
            self.arcs, contraction, contraction.offsets(weighted), self.lane_count
        )
        kind = own.kind[self.core_at]
        self.places = Places.of(
            contraction.arcs(weighted, at=self.core_at),
            (kind == Kind.SHORT) | (kind == Kind.KEEP_SHORT),
            self.blocks,
            nodes=contraction.nodes,
        )

    @property
    def capacity(self) -> IntArray:
        """The capacity of every lane."""
        return self.arcs.capacity[: self.lane_count]

    @cached_property
    def forced(self) -> IntArray:
        """Lanes that every shortlist has: those that must carry something, or earn money."""
        lanes = slice(0, self.lane_count)
        return np.flatnonzero((self.arcs.minimum[lanes] > 0) | (self.arcs.cost[lanes] < 0))

    def shortlist(self, *lanes: IntArray) -> Shortlist:
        """Return a shortlist of ``lanes`` and of those that are forced."""
        listed = np.zeros(self.lane_count, np.bool_)
        for some in (self.forced, *lanes):
            listed[some] = True
        at = np.flatnonzero(listed)
        return Shortlist(at=at, arcs=self.contraction.arcs(self.arcs.cost, at=at))

    def better(self, shortlist: Shortlist, solved: Solved) -> "Better":
        """Return the lanes that would still lower the cost."""
        lanes, reduced = self.blocks.not_above(solved.price, -1)
        listed = np.zeros(lanes.shape[0], np.bool_)
        full = listed.copy()
        if lanes.shape[0] and shortlist.at.shape[0]:
            at = np.minimum(np.searchsorted(shortlist.at, lanes), shortlist.at.shape[0] - 1)
            listed = shortlist.at[at] == lanes
            full = listed & (solved.lanes[at] == self.capacity[lanes])
        return Better(
            lanes=lanes[~full], reduced=reduced[~full], listed=bool((listed & ~full).any())
        )


def fits(weighted: MoneyArray, contraction: Contraction) -> bool:
    """Return whether all costs leave room for prices that are sums of them, in int64."""
    if weighted.dtype == object:
        return False
    return largest(weighted) * contraction.nodes < PRICE_MAX
