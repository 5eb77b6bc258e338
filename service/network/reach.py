"""Which items can use which lane, and where goods can come from.

Item k can use a lane of its own, and a lane without an item if stock of k reaches its origin and
from its destination wanted or forced goods of k are reached, moving along lanes of k or of any
item, and on through cross-docks only. Every such lane on the way is then usable as well, so that
"along lanes usable by k" needs no second round. Closures and all other rules are ignored.
"""

from collections.abc import Sequence
from functools import cached_property

import numpy as np

from service.network.columns import BoolArray, CodeArray, IntArray, Network

# 256 MiB of row numbers.
ROWS_KEPT_MAX = 2**25


class LaneUse:
    """Which lanes each item of a network can use, found item by item when asked."""

    def __init__(self, network: Network) -> None:
        """Prepare for ``network``; the tables may be in any order."""
        self._network = network
        self._passes_on = np.array(
            ["cross_dock" in site.roles for site in network.sites], dtype=np.bool_
        )
        supply, demand, items = network.supply, network.demand, len(network.items)
        self._lanes = _ByItem(network.lanes.item, items)
        stock = np.flatnonzero(supply.quantity.values > 0)
        wanted = np.flatnonzero(demand.quantity.values > 0)
        self._supply = _ByItem(supply.item, items)
        self._stock = _ByItem(supply.item, items, stock)
        self._wanted = _ByItem(demand.item, items, wanted)
        self._found: dict[int, IntArray] = {}
        self._kept = 0

    @cached_property
    def any_item(self) -> IntArray:
        """Rows of the lanes without an item, ascending."""
        return self._lanes.rows(-1)

    @property
    def passes_on(self) -> BoolArray:
        """Which sites are cross-docks, in shape (sites,)."""
        return self._passes_on

    def own(self, item: int) -> IntArray:
        """Return the rows of the lanes that name ``item``, ascending."""
        return self._lanes.rows(item)

    def rows(self, item: int) -> IntArray:
        """Return the rows of all lanes that ``item`` can use, ascending."""
        found = self._found.get(item)
        if found is None:
            found = self._usable(item)
            # Many items on many lanes for any item would fill the memory; then each asks again.
            if self._kept + len(found) <= ROWS_KEPT_MAX:
                self._found[item] = found
                self._kept += len(found)
        return found

    def stock(self, item: int) -> BoolArray:
        """Return, in shape (sites,), where a supply row of ``item`` has more than 0."""
        return self._sites(self._network.supply.site[self._stock.rows(item)])

    def wanted(self, item: int) -> BoolArray:
        """Return, in shape (sites,), where an order line of ``item`` wants more than 0."""
        return self._sites(self._network.demand.site[self._wanted.rows(item)])

    def received(self, item: int) -> BoolArray:
        """Return, in shape (sites,), where a lane that ``item`` can use ends."""
        return self._sites(self._network.lanes.destination[self.rows(item)])

    def sent(self, item: int) -> BoolArray:
        """Return, in shape (sites,), where a lane that ``item`` can use begins."""
        return self._sites(self._network.lanes.origin[self.rows(item)])

    def apart(self, item: int) -> BoolArray:
        """Return, in shape (sites,), which sites keep received goods of ``item`` from their stock.

        They do where received goods may not leave again although own stock, or a lane, may take
        goods out, and where an order line of the item names the origins that may serve it.
        """
        demand, lines = self._network.demand, self._wanted.rows(item)
        choosy = lines[demand.origins.codes[lines] >= 0]
        stocked = self._sites(self._network.supply.site[self._supply.rows(item)])
        mixed = ~self._passes_on & self.received(item) & (stocked | self.sent(item))
        return mixed | self._sites(demand.site[choosy])

    def stock_reaching(self, item: int, place: int) -> BoolArray:
        """Return, in shape (sites,), whose stock of ``item`` can be at ``place`` to be sent on.

        A place that is no cross-dock sends its own stock only.
        """
        stock = self.stock(item)
        start = np.zeros(len(stock), dtype=np.bool_)
        start[place] = True
        if not self._passes_on[place]:
            return start & stock
        lanes, rows = self._network.lanes, self.rows(item)
        back = Steps(lanes.destination[rows], lanes.origin[rows], len(stock))
        return (start | reached((back,), start, through=self._passes_on)) & stock

    def _usable(self, item: int) -> IntArray:
        """Find the lanes of one item."""
        own, free = self.own(item), self.any_item
        if len(free) == 0:
            return own
        lanes = self._network.lanes
        forced = self._sites(lanes.origin[own[lanes.must_ship.values[own] > 0]])
        # Goods that arrive where a forced lane begins go on through a cross-dock, or not at all.
        goal = self.wanted(item) | (forced & self._passes_on)
        stock = self.stock(item)
        on = self._passes_on
        of_any_forward, of_any_back = self._any_steps
        own_forward = Steps(lanes.origin[own], lanes.destination[own], len(on))
        own_back = Steps(lanes.destination[own], lanes.origin[own], len(on))
        sends = stock | (reached((of_any_forward, own_forward), stock, through=on) & on)
        gets = goal | (reached((of_any_back, own_back), goal, through=on) & on)
        usable = free[sends[lanes.origin[free]] & gets[lanes.destination[free]]]
        return np.sort(np.concatenate((own, usable)))

    @cached_property
    def _any_steps(self) -> tuple["Steps", "Steps"]:
        """Steps along lanes without an item, forward and back; the same for every item."""
        lanes, free = self._network.lanes, self.any_item
        origins, destinations = lanes.origin[free], lanes.destination[free]
        sites = len(self._passes_on)
        return Steps(origins, destinations, sites), Steps(destinations, origins, sites)

    def _sites(self, places: CodeArray) -> BoolArray:
        """Return flags in shape (sites,), True at ``places``."""
        flags = np.zeros(len(self._network.sites), dtype=np.bool_)
        flags[places] = True
        return flags


class _ByItem:
    """Row numbers by item (-1: any), ascending within each."""

    def __init__(self, item: CodeArray, items: int, rows: IntArray | None = None) -> None:
        """Sort ``rows`` (None: all) of a table with this column of items."""
        picked = np.arange(len(item), dtype=np.int64) if rows is None else rows
        self._order: IntArray = picked[np.argsort(item[picked], kind="stable")]
        self._bounds = np.searchsorted(item[self._order], np.arange(-1, items + 1))

    def rows(self, item: int) -> IntArray:
        """Return the rows of one item."""
        return self._order[self._bounds[item + 1] : self._bounds[item + 2]]


class Steps:
    """Where one step leads from each site, along given lanes."""

    def __init__(self, tails: CodeArray, heads: CodeArray, sites: int) -> None:
        """Index the steps from ``tails`` to ``heads``, both of shape (lanes,)."""
        # Sorting, where np.unique would hash: 1.9 s against 0.1 s for a million pairs.
        pairs = np.sort(tails.astype(np.int64) * max(sites, 1) + heads)
        pairs = pairs[np.append(True, pairs[1:] != pairs[:-1])[: len(pairs)]]
        self._heads = pairs % max(sites, 1)
        self._bounds = np.searchsorted(pairs, np.arange(sites + 1) * max(sites, 1))

    def after(self, places: IntArray) -> IntArray:
        """Return the sites that one step from ``places`` leads to, repeats included."""
        first = self._bounds[places]
        counts = self._bounds[places + 1] - first
        total = int(counts.sum())
        shift = np.repeat(first - (np.cumsum(counts) - counts), counts)
        heads: IntArray = self._heads[shift + np.arange(total)]
        return heads


def reached(ways: Sequence[Steps], start: BoolArray, *, through: BoolArray) -> BoolArray:
    """Return the sites that one step or more leads to from ``start``, in shape (sites,).

    From sites that were reached, only those of ``through`` lead on.
    """
    found = np.zeros(len(start), dtype=np.bool_)
    done = start.copy()
    places = np.flatnonzero(start)
    while len(places):
        news = np.concatenate([way.after(places) for way in ways])
        found[news] = True
        places = np.unique(news[through[news] & ~done[news]])
        done[places] = True
    return found
