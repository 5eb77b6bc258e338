"""A network with few of its lanes: solved exactly near given prices, for better prices."""

from dataclasses import dataclass

import numpy as np

from service.network.columns import BoolArray, IntArray
from service.planning.flow.min_cost_flow import cost_limit, least_cost_flow
from service.planning.flow.prices import shortest_distances
from service.planning.model.arcs import ROOT, UNLIMITED, Arcs, largest, narrowed
from service.planning.model.limits import NumbersTooLargeError
from service.planning.wide.places import Places


@dataclass(frozen=True, slots=True, kw_only=True)
class Shortlist:
    """Some lanes, between places; ``at`` are their positions among all lanes, ascending."""

    at: IntArray
    arcs: Arcs

    def reduced(self, price: IntArray) -> IntArray:
        """Return the reduced cost of every lane."""
        reduced: IntArray = self.arcs.cost + price[self.arcs.tail] - price[self.arcs.head]
        return reduced


@dataclass(frozen=True, slots=True, kw_only=True)
class Solved:
    """The optimum of a shortlist: flow by lane of the list and by core arc, prices by place.

    ``missing`` are the steps that only the aids of the solve could bring or take.
    """

    lanes: IntArray
    core: IntArray
    price: IntArray
    missing: int


def solve_shortlist(
    shortlist: Shortlist, places: Places, *, price: IntArray, reach: int, shortage: bool
) -> Solved:
    """Solve the network that has only the lanes of ``shortlist``.

    ``price`` is what prices are near to: costs are reduced by it, which makes most of them small,
    and what would cost less than -``reach`` counts as -``reach``. At a cost of ``reach`` goods
    appear where lanes begin, or end with a limit, so that too short a list has a solution too (and
    prices move by about ``reach`` at most). So the result is an optimum of the shortlist only if
    nothing is ``missing`` and its prices prove it. Shortage arcs are left out unless ``shortage``.

    A place with a single lane that can bring all it wants is settled without the solver.
    """
    lanes, core = shortlist.arcs, places.core
    kept_core = np.flatnonzero((~places.short | shortage) & (core.tail != core.head))
    lone = _lone(lanes, places, shortage=shortage)
    left = np.flatnonzero(~lone & (lanes.tail != lanes.head))
    settled = np.zeros(places.nodes, np.bool_)
    settled[lanes.head[lone]] = True
    balance = np.zeros(places.nodes, np.int64)
    alone = np.flatnonzero(lone)
    np.add.at(balance, lanes.tail[alone], places.fixed[lanes.head[alone]])
    balance[ROOT] -= balance.sum()
    kept_core = kept_core[~settled[core.tail[kept_core]]]
    aids = _aids(lanes.at(left), places, settled, reach=reach)
    parts = (lanes.at(left), core.at(kept_core), aids)
    open_ = np.concatenate([part.capacity == UNLIMITED for part in parts])
    arcs = Arcs(
        tail=np.concatenate([part.tail for part in parts]),
        head=np.concatenate([part.head for part in parts]),
        minimum=np.concatenate([part.minimum for part in parts]),
        capacity=np.concatenate([_capacity(part, places) for part in parts]),
        cost=np.concatenate([part.cost for part in parts]),
    )
    listed = left.shape[0] + kept_core.shape[0]
    reduced = arcs.cost.copy()
    reduced[:listed] += price[arcs.tail[:listed]] - price[arcs.head[:listed]]
    never_full = np.flatnonzero(open_[:listed])
    if (reduced[never_full] < 0).any():
        # A lane that has joined, say: the price where it ends comes down. After that only limited
        # arcs have negative reduced costs, which last where they are full.
        tail, head = arcs.tail[never_full], arcs.head[never_full]
        # Where a place cannot be reached its price is near the limit, and sums were widened.
        fall = narrowed(shortest_distances(tail, head, reduced[never_full], nodes=places.nodes))
        if fall.dtype == object:
            raise NumbersTooLargeError("Prices of a shortlist leave 64 bits.")
        price = price + fall
        reduced[:listed] += fall[arcs.tail[:listed]] - fall[arcs.head[:listed]]
    np.maximum(reduced, -reach, out=reduced, where=~open_)
    used = np.zeros(places.nodes, np.bool_)
    used[ROOT] = True
    used[arcs.tail] = True
    used[arcs.head] = True
    used |= balance != 0
    number = np.cumsum(used) - 1
    small = Arcs(
        tail=number[arcs.tail],
        head=number[arcs.head],
        minimum=arcs.minimum,
        capacity=arcs.capacity,
        cost=reduced,
    )
    count = int(used.sum())
    if largest(reduced) > cost_limit(count):
        raise NumbersTooLargeError("Costs near the prices of a shortlist leave the solver's range.")
    flow = least_cost_flow(
        small, nodes=count, balance=balance[used], loops_below_zero=bool((reduced < 0).any())
    )
    full = ~open_ & (flow >= np.concatenate([part.capacity for part in parts]))
    more, less = np.flatnonzero(~full), np.flatnonzero(flow > arcs.minimum)
    distance = np.zeros(places.nodes, np.int64)
    distance[used] = shortest_distances(
        np.concatenate((small.tail[more], small.head[less])),
        np.concatenate((small.head[more], small.tail[less])),
        np.concatenate((reduced[more], -reduced[less])),
        nodes=count,
    )
    found = price + distance - (price + distance)[ROOT]
    found[lanes.head[alone]] = found[lanes.tail[alone]] + lanes.cost[alone]
    on_lanes, on_core = lanes.minimum.copy(), core.minimum.copy()
    on_lanes[alone] = places.fixed[lanes.head[alone]]
    on_lanes[left] = flow[: left.shape[0]]
    on_core[kept_core] = flow[left.shape[0] : listed]
    return Solved(lanes=on_lanes, core=on_core, price=found, missing=int(flow[listed:].sum()))


def _lone(lanes: Arcs, places: Places, *, shortage: bool) -> BoolArray:
    """Return which lanes are the only ones into an end, and can bring all that is wanted there."""
    outer = lanes.tail != lanes.head
    ways = np.bincount(lanes.head[outer], minlength=places.nodes)
    if shortage:
        ways[places.core.head[places.short]] += 1
    wanted = places.fixed[lanes.head]
    roomy = (lanes.capacity == UNLIMITED) | (lanes.capacity >= wanted)
    lone: BoolArray = (
        outer & places.ends[lanes.head] & (ways[lanes.head] == 1) & roomy & (lanes.minimum == 0)
    )
    return lone


def _capacity(arcs: Arcs, places: Places) -> IntArray:
    """Return capacities; into an end no more than what is wanted there.

    The solver is a third faster with such limits (measured with ortools 9.15.6755, 2026-12-01).
    """
    wanted = np.where(arcs.minimum > 0, UNLIMITED, places.fixed[arcs.head])
    tight = places.ends[arcs.head] & (wanted != UNLIMITED)
    tight &= (arcs.capacity == UNLIMITED) | (arcs.capacity > wanted)
    return np.where(tight, wanted, arcs.capacity)


def _aids(lanes: Arcs, places: Places, settled: BoolArray, *, reach: int) -> Arcs:
    """Return arcs that bring goods where the list may bring too little, or take too much away."""
    brings = ~places.ends
    brings[lanes.head[lanes.capacity != UNLIMITED]] = True
    without = np.ones(places.nodes, np.bool_)
    without[lanes.head] = False
    brings |= without & places.ends & (places.fixed > 0)
    brings &= ~settled
    brings[ROOT] = False
    forced = bool((lanes.minimum > 0).any()) or bool(
        (places.core.minimum < places.core.capacity)[places.core.minimum > 0].any()
    )
    takes = ~places.ends if forced else np.zeros(places.nodes, np.bool_)
    takes[ROOT] = False
    to, away = np.flatnonzero(brings), np.flatnonzero(takes)
    count = to.shape[0] + away.shape[0]
    return Arcs(
        tail=np.concatenate((np.full(to.shape[0], ROOT), away)),
        head=np.concatenate((to, np.full(away.shape[0], ROOT))),
        minimum=np.zeros(count, np.int64),
        capacity=np.full(count, UNLIMITED),
        cost=np.full(count, reach, np.int64),
    )
