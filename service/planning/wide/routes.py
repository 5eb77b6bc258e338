"""Two ways to an optimum of one item: over all arcs at once, or sifted; both end with the same."""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Protocol

import numpy as np

from service.network.columns import IntArray
from service.planning.flow.contraction import Contraction
from service.planning.flow.prices import residual_prices, shortest_distances
from service.planning.flow.ranges import exact_flow
from service.planning.model.arcs import ROOT, Arcs, MoneyArray
from service.planning.model.item_network import ItemNetwork
from service.planning.wide.scarcity_prices import FloatArray
from service.planning.wide.sieve import Sieve, fits
from service.planning.wide.sifting import RoundSeen, Sifted, sift

# Below these the full solve is as fast. Swept on seeds of its own, CPU time sifted over full
# (ortools 9.15.6755, 2026-12-01): 15 x 2,000 0.92, 15 x 1,000 1.44; 10 x 5,000 1.25, 15 x 4,000
# 0.76; 200 x 100 3.0, 200 x 200 1.6, 200 x 400 0.59.
LANES_MIN = 30_000
LANES_PER_END_MIN = 15
ENDS_PER_ORIGIN_MIN = 2


@dataclass(frozen=True, slots=True, kw_only=True)
class Optimum:
    """A flow of least cost on the arcs at the original positions ``at``, ascending.

    No other arc carries anything, or has a reduced cost of 0 under ``price``, which is by place.
    ``arcs`` are those at ``at``, between places.
    """

    at: IntArray
    arcs: Arcs
    flow: IntArray
    price: MoneyArray


class Route(Protocol):
    """A way to an optimum of one contracted item."""

    def optimum(self) -> Optimum:
        """Return an optimum; raises what ``exact_flow`` raises."""

    def prices(self, optimum: Optimum, flow: IntArray) -> MoneyArray:
        """Return, by place, the prices of ``flow`` that follow from network and flow alone.

        They are those of ``residual_prices`` over all arcs. ``flow`` is of least cost on the arcs
        of ``optimum``.
        """


# Chooses the route of an item, given its contraction and what each of its arcs costs the solver.
Front = Callable[[ItemNetwork, Contraction, MoneyArray], Route]


class FullRoute:
    """Solves all arcs at once."""

    def __init__(self, own: ItemNetwork, contraction: Contraction, weighted: MoneyArray) -> None:
        """Take the arcs between places."""
        del own
        self._contraction = contraction
        self._arcs = contraction.arcs(weighted)

    def optimum(self) -> Optimum:
        """Return an optimum; raises what ``exact_flow`` raises."""
        flow = exact_flow(self._arcs, nodes=self._contraction.nodes)
        return Optimum(
            at=self._contraction.kept,
            arcs=self._arcs,
            flow=flow,
            price=residual_prices(self._arcs, flow, nodes=self._contraction.nodes),
        )

    def prices(self, optimum: Optimum, flow: IntArray) -> MoneyArray:
        """Return the prices of ``flow``, by place."""
        if flow is optimum.flow:
            return optimum.price
        return residual_prices(self._arcs, flow, nodes=self._contraction.nodes)


class SiftedRoute:
    """Solves shortlists of lanes, and all arcs at once only where sifting does not end."""

    def __init__(
        self,
        own: ItemNetwork,
        contraction: Contraction,
        weighted: MoneyArray,
        *,
        start: FloatArray | None = None,
        seen: RoundSeen | None = None,
    ) -> None:
        """Lay out the lanes; ``start`` and ``seen`` as in ``sift``."""
        self._own, self._contraction, self._weighted = own, contraction, weighted
        self._sieve = Sieve(own, contraction, weighted)
        self._start, self._seen = start, seen
        self._full: FullRoute | None = None

    def optimum(self) -> Optimum:
        """Return an optimum; raises what ``exact_flow`` raises."""
        sifted = sift(self._sieve, start=self._start, seen=self._seen)
        if sifted is None:
            self._full = FullRoute(self._own, self._contraction, self._weighted)
            return self._full.optimum()
        return self._with_ties(sifted)

    def _with_ties(self, sifted: Sifted) -> Optimum:
        """Return the optimum on the lanes that carry something, or could in a plan as good."""
        even, reduced = self._sieve.blocks.not_above(sifted.price, 0)
        looked_at = np.zeros(self._sieve.lane_count, np.bool_)
        looked_at[even[reduced == 0]] = True
        looked_at[sifted.lanes[sifted.lane_flow > 0]] = True
        lanes = np.flatnonzero(looked_at)
        on_lane = np.zeros(self._sieve.lane_count, np.int64)
        on_lane[sifted.lanes] = sifted.lane_flow
        at = np.concatenate((lanes, self._sieve.core_at))
        return Optimum(
            at=at,
            arcs=self._contraction.arcs(self._weighted, at=at),
            flow=np.concatenate((on_lane[lanes], sifted.core_flow)),
            price=sifted.price,
        )

    def prices(self, optimum: Optimum, flow: IntArray) -> MoneyArray:
        """Return the prices of ``flow``, by place.

        Distances over few arcs are those over all as soon as no other arc would shorten one.
        """
        if self._full is not None:
            return self._full.prices(optimum, flow)
        sieve, nodes = self._sieve, self._contraction.nodes
        on_lane = np.zeros(sieve.lane_count, np.int64)
        carried = flow[: optimum.at.shape[0] - sieve.core_at.shape[0]]
        lanes = optimum.at[: carried.shape[0]]
        on_lane[lanes] = carried
        arcs, distance = optimum.arcs, np.zeros(nodes, np.int64)
        while True:
            more, less = (
                np.flatnonzero(arcs.can_take_more(flow)),
                np.flatnonzero(arcs.can_give_up(flow)),
            )
            distance = shortest_distances(
                np.concatenate((arcs.tail[more], arcs.head[less])),
                np.concatenate((arcs.head[more], arcs.tail[less])),
                np.concatenate((arcs.cost[more], -arcs.cost[less])),
                nodes=nodes,
                start=distance,
            )
            nearer, _ = sieve.blocks.not_above(distance, -1)
            nearer = nearer[on_lane[nearer] != sieve.capacity[nearer]]
            if nearer.shape[0] == 0:
                price: MoneyArray = distance - distance[ROOT]
                return price
            lanes = np.unique(np.concatenate((lanes, nearer)))
            at = np.concatenate((lanes, sieve.core_at))
            core_flow = flow[flow.shape[0] - sieve.core_at.shape[0] :]
            arcs = self._contraction.arcs(self._weighted, at=at)
            flow = np.concatenate((on_lane[lanes], core_flow))


def chosen_route(
    own: ItemNetwork,
    contraction: Contraction,
    weighted: MoneyArray,
    *,
    start: FloatArray | None = None,
    seen: RoundSeen | None = None,
) -> Route:
    """Return the sifted route where it pays, else the full one."""
    lanes = own.lanes.rows.shape[0]
    if lanes < LANES_MIN or not fits(weighted, contraction):
        return FullRoute(own, contraction, weighted)
    ends = _distinct(own.arcs.head[:lanes], own.node_count)
    origins = _distinct(own.arcs.tail[:lanes], own.node_count)
    if lanes < LANES_PER_END_MIN * ends or ends < ENDS_PER_ORIGIN_MIN * origins:
        return FullRoute(own, contraction, weighted)
    return SiftedRoute(own, contraction, weighted, start=start, seen=seen)


def _distinct(nodes: IntArray, count: int) -> int:
    """Return how many different ones of ``count`` nodes there are."""
    met = np.zeros(count, np.bool_)
    met[nodes] = True
    return int(met.sum())
