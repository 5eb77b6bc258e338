"""The arcs of one item: lanes, stock, what passes a site, who may serve whom, what is wanted."""

from dataclasses import dataclass
from fractions import Fraction
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from service.network.columns import CodeArray, IntArray, Network
from service.network.options import Options
from service.network.reach import LaneUse
from service.planning.arcs import ROOT, UNLIMITED, Arcs, Kind, largest
from service.planning.bounds import LaneBounds, lane_bounds
from service.planning.groups import IN_MONEY, Groups, groups_of
from service.planning.item_network import ItemNetwork
from service.planning.layout import Layout, layout_of
from service.planning.rule_book import RuleBook
from service.planning.scaling import Rationals, common_grid
from service.planning.stock import Stock, stock_of

# Positions of nodes or of what arcs stand for: as wide as they come.
Codes = NDArray[np.integer[Any]]


class Block(NamedTuple):
    """Arcs of one kind as columns; codes of whatever width."""

    kind: Kind
    tail: Codes
    head: Codes
    minimum: IntArray
    capacity: IntArray
    subject: CodeArray
    money: Rationals


@dataclass(slots=True, kw_only=True)
class ArcList:
    """Collects the arcs of one item block by block, before the scale of money is known."""

    item: int
    lanes: LaneBounds
    stock: Stock
    groups: Groups
    layout: Layout
    blocks: list[Block]

    def add(  # noqa: PLR0913 - the columns of an arc
        self,
        kind: Kind,
        tail: Codes,
        head: Codes,
        subject: Codes,
        *,
        minimum: IntArray | int = 0,
        capacity: IntArray | int = UNLIMITED,
        money: Rationals | None = None,
    ) -> None:
        """Add arcs of one kind; a missing cost is 0."""
        shape = subject.shape
        self.blocks.append(
            Block(
                kind=kind,
                tail=np.broadcast_to(np.asarray(tail), shape),
                head=np.broadcast_to(np.asarray(head), shape),
                minimum=np.broadcast_to(np.asarray(minimum, np.int64), shape),
                capacity=np.broadcast_to(np.asarray(capacity, np.int64), shape),
                subject=subject.astype(np.int32, copy=False),
                money=Rationals.zeros(shape[0]) if money is None else money,
            )
        )

    def grid(self) -> Fraction:
        """Return the largest number of which the money of every arc is a whole multiple."""
        return common_grid(block.money.grid() for block in self.blocks)

    def finish(self, scale: Fraction) -> ItemNetwork:
        """Return the item's network at ``scale``."""
        blocks = self.blocks
        cost = np.concatenate([block.money.times(scale).on(Fraction(1)) for block in blocks])
        priorities = sorted(
            (set(self.groups.priority.tolist()) | set(self.stock.kept_priority.tolist()))
            - {IN_MONEY}
        )
        return ItemNetwork(
            item=self.item,
            lanes=self.lanes,
            stock=self.stock,
            groups=self.groups,
            layout=self.layout,
            arcs=Arcs(
                tail=np.concatenate([block.tail for block in blocks], dtype=np.int64),
                head=np.concatenate([block.head for block in blocks], dtype=np.int64),
                minimum=np.concatenate([block.minimum for block in blocks]),
                capacity=np.concatenate([block.capacity for block in blocks]),
                cost=cost,
            ),
            kind=np.concatenate(
                [np.full(len(block.subject), int(block.kind), np.int8) for block in blocks]
            ),
            subject=np.concatenate([block.subject for block in blocks]),
            priorities=tuple(priorities),
            # Any loop trades at most one short step for another and gains at most n * max|c|
            # twice over in money; more than that for each step of priority.
            base=2 * len(self.layout.nodes) * largest(cost) + 1,
        )


def item_arcs(
    network: Network, options: Options, item: int, *, use: LaneUse, book: RuleBook
) -> ArcList:
    """Build the arcs of one item."""
    lanes = lane_bounds(network, item, use.rows(item), book)
    stock, groups = stock_of(network, item), groups_of(network, item, options)
    layout = layout_of(
        network,
        item,
        lanes=lanes,
        stock=stock,
        groups=groups,
        book=book,
        passes_on=use.passes_on,
    )
    arcs = ArcList(
        item=item,
        lanes=lanes,
        stock=stock,
        groups=groups,
        layout=layout,
        blocks=[],
    )
    tail, head = layout.lane_ends(
        network.lanes.origin[lanes.at], network.lanes.destination[lanes.at]
    )
    arcs.add(
        Kind.LANE,
        tail,
        head,
        np.arange(lanes.rows.shape[0], dtype=np.int32),
        minimum=lanes.minimum,
        capacity=lanes.capacity,
        money=lanes.money,
    )
    _add_stock(arcs)
    _add_sites(arcs, network, item)
    _add_serving(arcs, network, item, use)
    _add_wanting(arcs, shortages=options.shortages == "allow")
    return arcs


def _add_stock(arcs: ArcList) -> None:
    """Add what can be drawn, and what of it is kept."""
    stock, layout = arcs.stock, arcs.layout
    tiers = np.arange(stock.site.shape[0])
    plain, kept = tiers[layout.stock < 0], tiers[layout.stock >= 0]
    root = np.array(ROOT)
    arcs.add(
        Kind.SUPPLY,
        root,
        layout.inside[stock.site[plain]],
        plain,
        capacity=stock.steps[plain],
        money=stock.money.at(plain),
    )
    at = layout.stock[kept]
    arcs.add(Kind.SUPPLY, root, at, kept, capacity=stock.steps[kept])
    arcs.add(Kind.DRAW, at, layout.inside[stock.site[kept]], kept, money=stock.money.at(kept))
    keep_of_site = dict(zip(stock.kept_site.tolist(), layout.keep.tolist(), strict=True))
    keep = np.array([keep_of_site[site] for site in stock.site[kept].tolist()], np.int64)
    arcs.add(Kind.KEPT, at, keep, kept)


def _add_sites(arcs: ArcList, network: Network, item: int) -> None:
    """Add what passes a site: handling, throughput limits, closures."""
    layout = arcs.layout
    places = layout.relevant
    thing = network.items[item]
    handling = Rationals.given(
        [network.sites[place].handling(thing.id) * thing.step for place in places.tolist()]
    )
    arcs.add(
        Kind.THROUGH,
        layout.inside[places],
        layout.outside[places],
        places,
        capacity=np.where(layout.closed[places], 0, layout.limit["through"][places]),
        money=handling,
    )
    sending = places[layout.sent[places] >= 0]
    arcs.add(
        Kind.LEAVE,
        layout.outside[sending],
        layout.sent[sending],
        sending,
        capacity=layout.limit["sent"][sending],
    )
    node, site, _ = layout.arrivals
    joined = np.flatnonzero(~layout.apart[site])
    arcs.add(
        Kind.ARRIVE,
        node[joined],
        layout.inside[site[joined]],
        site[joined],
        capacity=layout.limit["received"][site[joined]],
    )
    passing = np.flatnonzero(layout.apart[site] & layout.passes_on[site])
    arcs.add(
        Kind.PASS,
        node[passing],
        layout.sent[site[passing]],
        site[passing],
        capacity=np.where(layout.closed[site[passing]], 0, UNLIMITED),
        money=handling.at(np.searchsorted(places, site[passing])),
    )


def _add_serving(arcs: ArcList, network: Network, item: int, use: LaneUse) -> None:
    """Add who may serve which group."""
    groups, layout = arcs.groups, arcs.layout
    own = np.array(
        [
            allowed is None or int(site) in allowed
            for site, allowed in zip(groups.site, groups.origins, strict=True)
        ],
        np.bool_,
    )
    served = np.flatnonzero(own)
    arcs.add(Kind.SERVE, layout.outside[groups.site[served]], layout.demand[served], served)
    node, site, origin = layout.arrivals
    stock_at = {
        place: frozenset(np.flatnonzero(use.stock_reaching(item, place)).tolist())
        for place in sorted(set(origin[origin >= 0].tolist()))
    }
    arrivals_of: dict[int, list[int]] = {}
    for at in np.flatnonzero(layout.apart[site]).tolist():
        arrivals_of.setdefault(int(site[at]), []).append(at)
    pairs = [
        (at, group)
        for group, (place, allowed) in enumerate(
            zip(groups.site.tolist(), groups.origins, strict=True)
        )
        for at in arrivals_of.get(place, ())
        if allowed is None or _all_named(stock_at[int(origin[at])], allowed)
    ]
    arrived, group = np.array(pairs, np.int64).reshape(len(pairs), 2).T
    thing = network.items[item]
    arcs.add(
        Kind.SERVE_ARRIVED,
        node[arrived],
        layout.demand[group],
        group,
        capacity=np.where(layout.closed[site[arrived]], 0, UNLIMITED),
        money=Rationals.given(
            [
                network.sites[place].handling(thing.id) * thing.step
                for place in site[arrived].tolist()
            ]
        ),
    )


def _all_named(stock: frozenset[int], allowed: frozenset[int]) -> bool:
    """Return whether some stock can come this way and all of it may serve.

    Where only a part is named the intake has refused the line (``origins_behind_cross_dock``).
    """
    return bool(stock) and stock <= allowed


def _add_wanting(arcs: ArcList, *, shortages: bool) -> None:
    """Add what is wanted and kept, and what may stay short of it."""
    groups, stock, layout = arcs.groups, arcs.stock, arcs.layout
    root = np.array(ROOT)
    for want, short, node, steps, money in (
        (Kind.WANT, Kind.SHORT, layout.demand, groups.steps, groups.money),
        (Kind.KEEP_WANT, Kind.KEEP_SHORT, layout.keep, stock.kept_steps, None),
    ):
        rows = np.arange(node.shape[0])
        arcs.add(want, node, root, rows, minimum=steps, capacity=steps)
        if shortages:
            arcs.add(short, root, node, rows, money=money)
