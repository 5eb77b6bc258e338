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
        self._ends_of: tuple[int, BoolArray, BoolArray] | None = None

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
        return self._ends(item)[1]

    def sent(self, item: int) -> BoolArray:
        """Return, in shape (sites,), where a lane that ``item`` can use begins."""
        return self._ends(item)[0]

    def _ends(self, item: int) -> tuple[BoolArray, BoolArray]:
        """Return, in shape (sites,), where a lane that ``item`` can use begins, and where it ends.

        The answer for the item asked last is kept: it is asked for several times in turn.
        """
        if self._ends_of is None or self._ends_of[0] != item:
            lanes, rows = self._network.lanes, self.rows(item)
            # All of a column need not be picked from it.
            every = len(rows) == len(lanes)
            origins = lanes.origin if every else lanes.origin[rows]
            destinations = lanes.destination if every else lanes.destination[rows]
            self._ends_of = item, self._sites(origins), self._sites(destinations)
        return self._ends_of[1:]

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
        back = Steps(lanes.destination[rows], lanes.origin[rows], through=self._passes_on)
        return (start | reached((back,), start)) & stock

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
        origins, destinations, of_any_forward, of_any_back = self._any_steps
        own_forward = Steps(lanes.origin[own], lanes.destination[own], through=on)
        own_back = Steps(lanes.destination[own], lanes.origin[own], through=on)
        sends = stock | (reached((of_any_forward, own_forward), stock) & on)
        gets = goal | (reached((of_any_back, own_back), goal) & on)
        usable = free[sends[origins] & gets[destinations]]
        return np.sort(np.concatenate((own, usable))) if len(own) else usable

    @cached_property
    def _any_steps(self) -> tuple[CodeArray, CodeArray, "Steps", "Steps"]:
        """Ends of the lanes without an item, and steps along them, forward and back.

        They are the same for every item.
        """
        lanes, free, on = self._network.lanes, self.any_item, self._passes_on
        origins, destinations = lanes.origin[free], lanes.destination[free]
        return (
            origins,
            destinations,
            Steps(origins, destinations, through=on),
            Steps(destinations, origins, through=on),
        )

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
        keys = item if rows is None else item[rows]
        if bool((keys[1:] < keys[:-1]).any()):
            # Short keys are sorted by their digits, in one pass over the rows for each.
            short = items < np.iinfo(np.int16).max
            order = np.argsort(keys.astype(np.int16) if short else keys, kind="stable")
            picked, keys = picked[order], keys[order]
        self._order: IntArray = picked
        self._bounds = np.searchsorted(keys, np.arange(-1, items + 1, dtype=np.int32))

    def rows(self, item: int) -> IntArray:
        """Return the rows of one item."""
        return self._order[self._bounds[item + 1] : self._bounds[item + 2]]


# After so many walks from different places an index pays: it takes as long as ten of them.
_WALKS_BEFORE_INDEX = 4


class Steps:
    """Where one step leads from each site, along given lanes; from ``through`` it goes on."""

    def __init__(self, tails: CodeArray, heads: CodeArray, *, through: BoolArray) -> None:
        """Take the lanes from ``tails`` to ``heads``, both of shape (lanes,)."""
        self._tails = tails
        self._heads = heads
        self.through = through
        self._walks = 0

    def first(self, start: BoolArray) -> BoolArray:
        """Return, in shape (sites,), where one step from the sites of ``start`` leads to."""
        found = np.zeros(len(start), dtype=np.bool_)
        self._walks += 1
        if self._walks > _WALKS_BEFORE_INDEX:
            found[self._from_everywhere.after(np.flatnonzero(start))] = True
        elif len(self._heads):
            found[self._heads[start[self._tails]]] = True
        return found

    def onward(self, places: IntArray) -> IntArray:
        """Return the sites that one step from ``places``, of ``through``, leads to."""
        return self._from_through.after(places)

    @cached_property
    def _from_everywhere(self) -> "_Index":
        """All steps."""
        return _Index(self._tails, self._heads, len(self.through))

    @cached_property
    def _from_through(self) -> "_Index":
        """The steps from sites that lead on."""
        own = self.through[self._tails]
        return _Index(self._tails[own], self._heads[own], len(self.through))


class _Index:
    """Steps by the site where they begin."""

    def __init__(self, tails: CodeArray, heads: CodeArray, sites: int) -> None:
        """Sort the steps from ``tails`` to ``heads``."""
        pairs = tails.astype(np.int64) * max(sites, 1) + heads
        if not bool((pairs[1:] > pairs[:-1]).all()):
            # Sorting, where np.unique would hash: 1.9 s against 0.1 s for a million pairs.
            pairs = np.sort(pairs)
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


def reached(ways: Sequence[Steps], start: BoolArray) -> BoolArray:
    """Return the sites that one step or more leads to from ``start``, in shape (sites,).

    From sites that were reached, only those that lead on do so. All ``ways`` agree which.
    """
    found = np.zeros(len(start), dtype=np.bool_)
    if not start.any():
        return found
    for way in ways:
        found |= way.first(start)
    through = ways[0].through
    done = start.copy()
    places = np.flatnonzero(found & through & ~done)
    while len(places):
        done[places] = True
        news = np.zeros(len(start), dtype=np.bool_)
        for way in ways:
            news[way.onward(places)] = True
        found |= news
        places = np.flatnonzero(news & through & ~done)
    return found
