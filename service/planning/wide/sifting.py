"""Least-cost flow over very many lanes: few are solved, all are priced, until none would help.

Column generation on lanes (Dantzig and Wolfe 1960; for transport problems with very many lanes
Bixby and others, *Very large-scale linear programming*, 1992, who call it sifting), each round
solved exactly in integers near estimated prices. What it ends with is an optimum over all lanes, by
prices that every lane was checked against; how it got there leaves no trace in a plan.
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from service.network.columns import IntArray
from service.planning.model.arcs import UNLIMITED, largest
from service.planning.model.limits import NoFlowError, NumbersTooLargeError
from service.planning.wide.nearest_lanes import Nearest
from service.planning.wide.places import Wishes
from service.planning.wide.price_estimate import Estimator, spread
from service.planning.wide.scarcity_prices import FloatArray
from service.planning.wide.shortlist import Shortlist, solve_shortlist
from service.planning.wide.sieve import Better, Sieve

# Beyond this the full solve is the better bet; two rounds are the rule.
ROUNDS_MAX = 12
# The first shortlist has so many lanes a place, by nearness (2.0 now and then costs a round, 2.6
# always costs time), and later ones what is at most half as far off, by better prices.
LISTED_LANES = 2.2
# Where hardly more is there than is wanted a shorter list can often not share it out.
TIGHT_LANES = 6
KEPT_PART = 2
# How far prices may move in one round, in terms of how near a lane must be to be listed, and how
# much further each time that this was not enough.
REACH, REACH_STEP = 4, 4
# Lanes that come in at a time, for each place that has any.
JOINING = 4

# Told after each round: its number, lanes listed, lanes that would still help.
RoundSeen = Callable[[int, int, int], None]


@dataclass(frozen=True, slots=True, kw_only=True)
class Sifted:
    """An optimum over all lanes: flow on ``lanes`` (ascending; no other has any) and core arcs.

    ``price`` is by place.
    """

    lanes: IntArray
    lane_flow: IntArray
    core_flow: IntArray
    price: IntArray
    rounds: int


def sift(
    sieve: Sieve, *, start: FloatArray | None = None, seen: RoundSeen | None = None
) -> Sifted | None:
    """Return an optimum over all lanes of ``sieve``, None where the full solve must decide.

    ``start`` are prices of a former run by place, NaN where unknown; they decide where the search
    starts, and are dropped if they are no use.
    """
    estimator = Estimator(sieve.blocks, sieve.places, sieve.capacity)
    found = None if start is None else estimator.fine(estimator.warm(start), warm=True)
    if found is None:
        found = estimator.fine(estimator.cold(), warm=False)
    assert found is not None  # noqa: S101 - only warm prices can be refused
    stock, nearest = found
    lanes_each = TIGHT_LANES if estimator.tight else LISTED_LANES
    most = _dearest_short(estimator.wishes, nodes=sieve.places.nodes)
    first = _first_list(sieve, nearest, estimator.places(stock), most=most, lanes_each=lanes_each)
    price, near, listed = first
    shortage = estimator.spare < 1 or sieve.places.some_out_of_reach()
    try:
        return _rounds(
            sieve, sieve.shortlist(listed), price, near=near, shortage=shortage, seen=seen
        )
    except (NoFlowError, NumbersTooLargeError):
        # Of a shortlist this says little; the full solve says it of the network, or does not.
        return None


def _rounds(  # noqa: PLR0913 - where the rounds begin
    sieve: Sieve,
    shortlist: Shortlist,
    price: IntArray,
    *,
    near: int,
    shortage: bool,
    seen: RoundSeen | None,
) -> Sifted | None:
    """Solve shortlists until no lane and no shortage would lower the cost.

    With ``shortage`` some of what is wanted must be short, whatever the prices.
    """
    places = sieve.places
    reach = max(1, REACH * near)
    dearest = largest(sieve.arcs.cost[: sieve.lane_count])
    for number in range(1, ROUNDS_MAX + 1):
        solved = solve_shortlist(shortlist, places, price=price, reach=reach, shortage=shortage)
        better = sieve.better(shortlist, solved)
        found = better.lanes.shape[0]
        sound = not (solved.missing or better.listed) and places.holds(solved.core, solved.price)
        if seen is not None:
            seen(number, shortlist.at.shape[0], found)
        if sound and found == 0:
            return Sifted(
                lanes=shortlist.at,
                lane_flow=solved.lanes,
                core_flow=solved.core,
                price=solved.price,
                rounds=number,
            )
        if not sound:
            reach *= REACH_STEP
            if reach > REACH_STEP * max(dearest, 1) and found == 0:
                if shortage or not places.short.any():
                    return None
                shortage = True
            if shortage:
                reach = max(reach, 2 * largest(places.core.cost) + 1)
        price = solved.price
        kept = (solved.lanes > 0) | (shortlist.reduced(price) <= KEPT_PART * near)
        shortlist = sieve.shortlist(
            shortlist.at[kept], _joining(better, most=JOINING * places.nodes)
        )
    return None


def _first_list(
    sieve: Sieve, nearest: Nearest, price: IntArray, *, most: IntArray, lanes_each: float
) -> tuple[IntArray, int, IntArray]:
    """Return prices of all places, how near a lane must be to be listed, and the lanes that are.

    ``most`` is, by place, what goods may be worth at most.
    """
    level = np.minimum(_levels(sieve, nearest, price), most[nearest.ends])
    leaves = sieve.places.leaves[nearest.ends]
    price = price.copy()
    price[nearest.ends[~leaves]] = level[~leaves]
    dearer = nearest.cost + price[nearest.tails] - price[nearest.ends]
    far = nearest.absent | (dearer < 0)
    # Where all that is wanted will be short, no lane is of use.
    served = (~far & (dearer <= 0)).any(axis=0)
    near = int(spread(np.where(far, np.inf, dearer)[:, served], lanes_each))
    listed = nearest.lanes[~nearest.absent & (dearer <= near)]
    lanes, _ = sieve.blocks.not_above(price, near)
    # Where very many lanes tie the nearest ones suffice: each place has its own of them.
    return price, near, lanes if lanes.shape[0] <= 2 * listed.shape[0] else listed


def _dearest_short(wishes: Wishes, *, nodes: int) -> IntArray:
    """Return, by place, the most that a step short of what is wanted there would cost."""
    dearest = np.full(nodes, -np.inf)
    np.maximum.at(dearest, wishes.place, wishes.short)
    most = np.iinfo(np.int64).max // 4
    level: IntArray = np.where(np.isfinite(dearest), dearest, most).astype(np.int64)
    return level


def _levels(sieve: Sieve, nearest: Nearest, price: IntArray) -> IntArray:
    """Return the price of each end: that of the dearest lane it needs for all that it wants."""
    landed = np.where(
        nearest.absent, np.iinfo(np.int64).max // 4, nearest.cost + price[nearest.tails]
    )
    limited = sieve.capacity[nearest.lanes]
    if bool((limited == UNLIMITED).all()):
        lowest: IntArray = landed.min(axis=0)
        return lowest
    wanted = sieve.places.fixed[nearest.ends]
    room = np.where(limited == UNLIMITED, wanted, np.minimum(limited, wanted))
    room[nearest.absent] = 0
    order = np.argsort(landed, axis=0, kind="stable")
    enough = np.cumsum(np.take_along_axis(room, order, axis=0), axis=0) >= wanted
    last = (~nearest.absent).sum(axis=0) - 1
    at = np.where(enough.any(axis=0), enough.argmax(axis=0), last)[None]
    level: IntArray = np.take_along_axis(landed, np.take_along_axis(order, at, axis=0), axis=0)[0]
    return level


def _joining(better: Better, *, most: int) -> IntArray:
    """Return the lanes that join the list: those that would lower the cost most."""
    if better.lanes.shape[0] <= most:
        return better.lanes
    return better.lanes[np.argpartition(better.reduced, most)[:most]]
