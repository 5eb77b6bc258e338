"""Which lanes an item can use, and which stock can reach a site; closures change neither."""

from typing import Any, TypeVar

import numpy as np
from numpy.typing import NDArray

from service.network.columns import BoolArray, IntArray, Network
from service.proof.exact import Positions

Value = TypeVar("Value", bound="np.generic[Any]")


def cross_docks(network: Network) -> BoolArray:
    """Return, in shape (sites,), which sites may pass goods on."""
    return np.array(["cross_dock" in site.roles for site in network.sites], dtype=np.bool_)


def stocked_sites(network: Network, item: int) -> BoolArray:
    """Return, in shape (sites,), which sites have stock of ``item`` above 0."""
    supply = network.supply
    there = np.zeros(len(network.sites), dtype=np.bool_)
    there[supply.site[(supply.item == item) & (supply.quantity.values > 0)]] = True
    return there


def usable_lanes(network: Network, item: int) -> IntArray:
    """Return the rows of the lanes that ``item`` can use, in the order of the table.

    Its own lanes, and those of any item whose origin can send it (it has stock, or passes on what
    a sending site can bring) and whose destination can take it (it is wanted there, or at a site
    that can be reached from there). Where an own lane must ship from a cross-dock the item is
    wanted as well.
    """
    lanes, demand = network.lanes, network.demand
    own = lanes.item == item
    if not (lanes.item == -1).any():
        return np.flatnonzero(own)
    candidates = np.flatnonzero(own | (lanes.item == -1))
    origin, destination = lanes.origin[candidates], lanes.destination[candidates]
    passing = cross_docks(network)
    sends = _spread(stocked_sites(network, item), origin, destination, passing)
    takes = np.zeros(len(network.sites), dtype=np.bool_)
    takes[demand.site[(demand.item == item) & (demand.quantity.values > 0)]] = True
    forced = lanes.origin[own & (lanes.must_ship.values > 0)]
    takes[forced[passing[forced]]] = True
    takes = _spread(takes, destination, origin, passing)
    useful: BoolArray = own[candidates] | (sends[origin] & takes[destination])
    return np.compress(useful, candidates)


def of_rows(column: NDArray[Value], rows: IntArray) -> NDArray[Value]:
    """Return what a column of all lanes says of ``rows``, ascending and distinct; do not write it.

    Where these are all rows it is the column itself: a copy of a million values takes longer than
    to check them.
    """
    return column if len(rows) == len(column) else column[rows]


def _spread(start: BoolArray, tail: Positions, head: Positions, passing: BoolArray) -> BoolArray:
    """Return the start sites and every passing site that arcs lead to from any of the result."""
    reached = start.copy()
    into = passing[head]
    tail, head = tail[into], head[into]
    while True:
        new = head[reached[tail] & ~reached[head]]
        if not len(new):
            return reached
        reached[new] = True


def stock_behind(network: Network, item: int, rows: IntArray, site: int) -> frozenset[int]:
    """Return the sites whose stock of ``item`` can leave ``site``, by the usable lanes ``rows``."""
    lanes = network.lanes
    stocked, passing = stocked_sites(network, item), cross_docks(network)
    seen = np.zeros(len(network.sites), dtype=np.bool_)
    seen[site] = True
    open_sites = [site]
    while open_sites:
        here = open_sites.pop()
        if not passing[here]:
            continue
        for before in np.unique(lanes.origin[rows[lanes.destination[rows] == here]]).tolist():
            if not seen[before]:
                seen[before] = True
                open_sites.append(before)
    return frozenset(np.flatnonzero(seen & stocked).tolist())
