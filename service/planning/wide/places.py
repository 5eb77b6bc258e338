"""What a contracted network says of its places: stock, what is wanted, and what lies between."""

from dataclasses import dataclass

import numpy as np

from service.network.columns import BoolArray, IntArray
from service.planning.model.arcs import ROOT, UNLIMITED, Arcs
from service.planning.wide.lane_blocks import LaneBlocks
from service.planning.wide.scarcity_prices import FloatArray, Offers

# How far wanted goods and prices are followed over places that are neither stock nor the end of
# lanes: chains of cross-docks longer than this start from worse prices.
FOLLOWED_MAX = 8


@dataclass(frozen=True, slots=True, kw_only=True)
class Wishes:
    """Goods wanted at a ``place``, in steps, and what a step ``short`` would cost as seen there.

    ``short`` is infinite where nothing may be short.
    """

    place: IntArray
    wanted: IntArray
    short: FloatArray


@dataclass(frozen=True, slots=True, kw_only=True)
class Places:
    """The arcs of a contracted network that are no lanes, and what follows from them by place.

    ``core`` are those arcs, between places; ``short`` tells the shortage arcs among them.
    ``fixed`` is what must leave each place over arcs of a fixed flow, in steps; ``ends`` tells the
    places from which nothing else can leave and which nothing but lanes and shortage can enter;
    ``leaves`` and ``enters`` those that lanes leave or enter.
    """

    nodes: int
    core: Arcs
    short: BoolArray
    fixed: IntArray
    ends: BoolArray
    leaves: BoolArray
    enters: BoolArray

    @staticmethod
    def of(core: Arcs, short: BoolArray, lanes: LaneBlocks, *, nodes: int) -> "Places":
        """Return the places of a network with such arcs and lanes."""
        held = (core.minimum == core.capacity) & (core.tail != core.head)
        fixed = np.zeros(nodes, np.int64)
        np.add.at(fixed, core.tail[held], core.minimum[held])
        ends = np.ones(nodes, np.bool_)
        leaves = lanes.tails(nodes)
        ends[leaves] = False
        ends[core.tail[~held]] = False
        ends[core.head[~short & (core.tail != core.head)]] = False
        return Places(
            nodes=nodes,
            core=core,
            short=short,
            fixed=fixed,
            ends=ends,
            leaves=leaves,
            enters=lanes.heads(nodes),
        )

    def holds(self, flow: IntArray, price: IntArray) -> bool:
        """Return whether prices prove the flow on arcs that are no lanes to be of least cost."""
        core = self.core
        outer = core.tail != core.head
        reduced = core.cost + price[core.tail] - price[core.head]
        return not bool(
            (outer & (reduced < 0) & core.can_take_more(flow)).any()
            or (outer & (reduced > 0) & core.can_give_up(flow)).any()
        )

    def some_out_of_reach(self) -> bool:
        """Return whether something is wanted where neither stock nor lanes can bring it."""
        return bool((self.ends & ~self.enters & (self.fixed > 0)).any())

    def offers(self) -> tuple[IntArray, Offers]:
        """Return the places with stock, and what is offered there."""
        given = np.flatnonzero((self.core.tail == ROOT) & ~self.short & (self.core.head != ROOT))
        order = given[np.lexsort((self.core.cost[given], self.core.head[given]))]
        place, first, tiers = np.unique(
            self.core.head[order], return_index=True, return_counts=True
        )
        column = np.arange(order.shape[0]) - np.repeat(first, tiers)
        row = np.repeat(np.arange(place.shape[0]), tiers)
        shape = (place.shape[0], int(tiers.max(initial=1)))
        cost, steps = np.full(shape, np.inf), np.zeros(shape)
        cost[row, column] = self.core.cost[order]
        room = self.core.capacity[order]
        steps[row, column] = np.where(room == UNLIMITED, float(self.fixed.sum()), room)
        return place, Offers(cost=cost, steps=steps)

    def wishes(self) -> Wishes:
        """Return what is wanted at each place or, through arcs that are no lanes, behind it."""
        place = np.flatnonzero(self.fixed > 0)
        short = np.full(self.nodes, np.inf)
        np.minimum.at(short, self.core.head[self.short], self.core.cost[self.short])
        cost = short[place]
        inner = ~self.short & (self.core.tail != ROOT) & (self.core.head != ROOT)
        inner &= self.core.tail != self.core.head
        tail, head, between = self.core.tail[inner], self.core.head[inner], self.core.cost[inner]
        ways_in = np.bincount(head, minlength=self.nodes) + self.enters
        lone = ways_in[head] == 1
        onward = np.arange(self.nodes)
        onward[head[lone]] = tail[lone]
        dearer = np.zeros(self.nodes)
        dearer[head[lone]] = between[lone]
        wanted = self.fixed[place]
        for _ in range(FOLLOWED_MAX):
            if (onward[place] == place).all():
                break
            cost = cost - dearer[place]
            place = onward[place]
        return Wishes(place=place, wanted=wanted, short=cost)


class Upstream:
    """Where goods at a place would come from, and at what price, over all that is no choice."""

    def __init__(self, places: Places, stock: IntArray, blocks: LaneBlocks) -> None:
        """Gather the arcs between places from which lanes leave; ``stock`` has the offers."""
        core = places.core
        inner = ~places.short & (core.tail != ROOT) & (core.head != ROOT) & (core.tail != core.head)
        inner &= core.capacity != 0
        tails, heads, costs = [core.tail[inner]], [core.head[inner]], [core.cost[inner]]
        for block in blocks.blocks:
            for row in np.flatnonzero(places.leaves[block.ends]).tolist():
                slot = np.arange(block.cost.shape[1])
                if block.absent is not None:
                    slot = slot[~block.absent[row]]
                at = np.full(slot.shape[0], row)
                tails.append(block.tail_at(at, slot))
                heads.append(block.ends[at])
                costs.append(block.cost[row, slot].astype(np.int64))
        self._tail, self._head = np.concatenate(tails), np.concatenate(heads)
        self._cost = np.concatenate(costs).astype(np.float64)
        self._stock, self._nodes = stock, places.nodes

    def prices(self, price: FloatArray) -> tuple[FloatArray, IntArray]:
        """Return the price of every place (infinite: nothing gets there) and whose stock it is.

        ``price`` is that of the offers, in their order, and so is what is returned second (0 where
        nothing gets there).
        """
        landed = np.full(self._nodes, np.inf)
        landed[self._stock] = price
        source = np.zeros(self._nodes, np.int64)
        source[self._stock] = np.arange(self._stock.shape[0])
        for _ in range(FOLLOWED_MAX if self._tail.shape[0] else 0):
            through = landed[self._tail] + self._cost
            nearer = landed.copy()
            np.minimum.at(nearer, self._head, through)
            if np.array_equal(nearer, landed):
                break
            better = np.flatnonzero(
                (through == nearer[self._head]) & (through < landed[self._head])
            )
            source[self._head[better]] = source[self._tail[better]]
            landed = nearer
        return landed, source
