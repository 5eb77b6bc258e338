"""The flow of one item cut into paths: which goods, drawn where, went which way to whom."""

from collections.abc import Callable
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from service.planning.model.arcs import SIDES, UNLIMITED, Kind, Side
from service.planning.solve import ItemFlow

# What goods move on; the other arcs say where they come from and what is wanted.
MOVING = (
    Kind.LANE,
    Kind.DRAW,
    Kind.THROUGH,
    Kind.ARRIVE,
    Kind.LEAVE,
    Kind.PASS,
    Kind.SERVE,
    Kind.SERVE_ARRIVED,
    Kind.STORE,
)


class Path(NamedTuple):
    """``steps`` of stock ``row`` (a position in ``Stock.rows``), over ``legs``, to ``group``.

    ``legs`` are positions in ``LaneBounds.rows``; none where goods are served where they lie.
    ``arrives`` is the day on which they are served (0 without dates).
    """

    site: int
    row: int
    legs: tuple[int, ...]
    group: int
    steps: int
    arrives: int = 0


@dataclass(frozen=True, slots=True, kw_only=True)
class Paths:
    """All paths of one item, and the steps by lane that reach no order line but only circle."""

    paths: tuple[Path, ...]
    circling: dict[int, int]


def paths_of(solved: ItemFlow, *, lane_key: Callable[[list[int]], list[bytes]]) -> Paths:
    """Cut the flow of one item into paths.

    Stock is walked by site in the order of ids, and at a site in the order of the supply table.
    Where goods stand they serve that place's groups first, in their order, and then leave on the
    lane with the smallest name that has flow left; ``lane_key`` gives the names of lanes (by
    position in ``LaneBounds.rows``) as bytes. A way that comes back to where it was is a loop:
    its flow circles and belongs to no order line.
    """
    walker = _Walker(solved, lane_key)
    paths: dict[tuple[int, int, tuple[int, ...], int, int], int] = {}
    layout, tier_of = solved.own.layout, solved.own.stock.row_tier.tolist()
    shelves, first = layout.stock.tolist(), layout.places.first
    for site, row, steps in drawn_rows(solved):
        left = steps
        shelf = shelves[tier_of[row]]
        start = shelf if shelf >= 0 else int(layout.inside[first[site]])
        while left:
            legs, group, arrives, amount = walker.walk(start, left)
            key = (site, row, legs, group, arrives)
            paths[key] = paths.get(key, 0) + amount
            left -= amount
    return Paths(
        paths=tuple(
            Path(site=site, row=row, legs=legs, group=group, steps=steps, arrives=arrives)
            for (site, row, legs, group, arrives), steps in paths.items()
        ),
        circling=walker.lanes_left(),
    )


def drawn_rows(solved: ItemFlow) -> list[tuple[int, int, int]]:
    """Return (site, row, steps) of the stock that leaves the shelf, in the order of the table."""
    stock = solved.own.stock
    kept = solved.amounts(Kind.KEPT)
    drawn = {tier: steps - kept.get(tier, 0) for tier, steps in solved.amounts(Kind.SUPPLY).items()}
    rows = []
    for row, (tier, has) in enumerate(
        zip(stock.row_tier.tolist(), stock.row_steps.tolist(), strict=True)
    ):
        steps = min(has, drawn.get(tier, 0))
        if steps:
            drawn[tier] -= steps
            rows.append((int(stock.site[tier]), row, steps))
    return rows


class _Walker:
    """Walks the flow that is left from node to node and takes it away."""

    def __init__(self, solved: ItemFlow, lane_key: Callable[[list[int]], list[bytes]]) -> None:
        """Index the arcs with flow by the node they leave, in the order they are to be taken."""
        own = solved.own
        moving = np.flatnonzero(solved.flow)
        moving = moving[np.isin(own.kind[moving], [int(kind) for kind in MOVING])]
        kind, subject = own.kind[moving], own.subject[moving]
        lanes = np.flatnonzero(kind == Kind.LANE)
        names = lane_key(subject[lanes].tolist())
        rank = np.zeros(moving.shape[0], np.int64)
        # Names are distinct, so that their ranks sort as they do; nothing else has one.
        rank[lanes[sorted(range(len(names)), key=names.__getitem__)]] = np.arange(1, len(names) + 1)
        # What leaves today does not wait for tomorrow.
        rank[kind == Kind.STORE] = len(names) + 1
        serves = np.isin(kind, [Kind.SERVE, Kind.SERVE_ARRIVED])
        tail = own.arcs.tail[moving]
        order = np.lexsort((subject, rank, ~serves, tail))
        self._head = own.arcs.head[moving][order].tolist()
        self._tail = tail[order]
        self._is_lane = (kind[order] == Kind.LANE).tolist()
        self._subject = subject[order].tolist()
        self._left = solved.flow[moving][order].tolist()
        # The next arc with flow at each node: arcs are used up in their order.
        bounds = np.searchsorted(tail[order], np.arange(own.node_count + 1))
        self._next = bounds[:-1].tolist()
        self._circling: dict[int, int] = {}
        self._arrives = solved.own.lanes.arrives
        self._day = own.layout.places.day
        self._place = own.layout.nodes.place
        self._wants = (own.layout.nodes.side == SIDES.index(Side.DEMAND)).tolist()

    def walk(self, node: int, most: int) -> tuple[tuple[int, ...], int, int, int]:
        """Take at most ``most`` steps from ``node`` to a group; return legs, group, day, steps."""
        while True:
            way, seen, loop_from = [], {node: 0}, UNLIMITED
            at = node
            while not self._wants[at] and loop_from == UNLIMITED:
                arc = self._next_arc(at)
                way.append(arc)
                at = self._head[arc]
                loop_from = seen.get(at, UNLIMITED)
                seen[at] = len(way)
            if loop_from != UNLIMITED:
                loop = way[loop_from:]
                self._take(loop, min(self._left[arc] for arc in loop), circling=True)
                continue
            amount = min(most, *(self._left[arc] for arc in way))
            self._take(way, amount, circling=False)
            legs = tuple(self._subject[arc] for arc in way if self._is_lane[arc])
            day = 0
            if self._day is not None:
                day = int(self._day[self._place[self._tail[way[-1]]]])
            if self._arrives is not None and legs:
                # A place is named by the first of its days; only storage makes it a later one.
                day = max(day, int(self._arrives[legs[-1]]))
            return legs, self._subject[way[-1]], day, amount

    def lanes_left(self) -> dict[int, int]:
        """Return the flow of lanes that circles: taken as loops, or never reached from stock."""
        circling = dict(self._circling)
        for arc, left in enumerate(self._left):
            if left and self._is_lane[arc]:
                lane = self._subject[arc]
                circling[lane] = circling.get(lane, 0) + left
        return circling

    def _next_arc(self, node: int) -> int:
        """Return the first arc out of ``node`` that has flow left; there is one by balance."""
        arc: int = self._next[node]
        while not self._left[arc]:
            arc += 1
        self._next[node] = arc
        return arc

    def _take(self, way: list[int], amount: int, *, circling: bool) -> None:
        """Take ``amount`` steps off every arc of a way."""
        for arc in way:
            self._left[arc] -= amount
            if circling and self._is_lane[arc]:
                lane = self._subject[arc]
                self._circling[lane] = self._circling.get(lane, 0) + amount
