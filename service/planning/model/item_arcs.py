"""The arcs of one item: lanes, stock, what passes a site, who may serve whom, what is wanted."""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from service.network.columns import CodeArray, IntArray, Network
from service.network.days import Movements, first_day
from service.network.options import Options
from service.network.reach import LaneUse
from service.network.storage import storing_sites
from service.planning.model.arcs import ROOT, UNLIMITED, Arcs, Kind, largest
from service.planning.model.bounds import LaneBounds, lane_bounds
from service.planning.model.groups import IN_MONEY, Groups, groups_of
from service.planning.model.item_network import ItemNetwork, with_weight
from service.planning.model.layout import Layout, layout_of
from service.planning.model.rule_book import RuleBook
from service.planning.model.scaling import Rationals, common_grid
from service.planning.model.serving import add_serving
from service.planning.model.site_days import each_place
from service.planning.model.stock import Stock, stock_of
from service.planning.model.tariff_segments import with_segments

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
    late: IntArray


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
        days_late: IntArray | None = None,
    ) -> None:
        """Add arcs of one kind; a missing cost is 0, and so is lateness."""
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
                late=np.broadcast_to(np.int64(0), shape) if days_late is None else days_late,
            )
        )

    def grid(self) -> Fraction:
        """Return the largest number of which the money of every arc is a whole multiple."""
        return common_grid(block.money.grid() for block in self.blocks)

    def add_serving(  # noqa: PLR0913 - the columns of an arc
        self,
        kind: Kind,
        tail: IntArray,
        group: IntArray,
        place: IntArray,
        *,
        capacity: IntArray | int = UNLIMITED,
        handling: Sequence[Fraction] | None = None,
    ) -> None:
        """Add arcs to groups from ``place``; what is late costs money, if it costs any."""
        groups, day = self.groups, self.layout.places.day
        money = None if handling is None else Rationals.given(handling)
        late = None
        if day is not None:
            late = np.maximum(day[place] - groups.due[group], 0)
            costly = np.flatnonzero((late > 0) & groups.late_paid[group])
            if costly.shape[0]:
                amounts = [Fraction(0)] * group.shape[0] if handling is None else list(handling)
                for at in costly.tolist():
                    amounts[at] += int(late[at]) * groups.late_money.fraction(int(group[at]))
                money = Rationals.given(amounts)
        self.add(
            kind,
            tail,
            self.layout.demand[group],
            group,
            capacity=capacity,
            money=money,
            days_late=late,
        )

    def finish(self, scale: Fraction) -> ItemNetwork:
        """Return the item's network at ``scale``."""
        blocks = self.blocks
        cost = np.concatenate([block.money.times(scale).on(Fraction(1)) for block in blocks])
        priorities = sorted(
            (set(self.groups.priority.tolist()) | set(self.stock.kept_priority.tolist()))
            - {IN_MONEY}
        )
        subject = np.concatenate([block.subject for block in blocks])
        late, weight = self._lateness(subject)
        nodes = len(self.layout.nodes)
        # Any loop trades at most one short step for another and gains at most n * max|c|
        # twice over in money; more than that for each step of priority. So it is for each step
        # and day late, and those weights count as costs for the priorities.
        late_base = 2 * nodes * largest(cost) + 1 if weight.any() else 0
        counted = with_weight(cost, weight, late_base)
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
            subject=subject,
            days_late=late,
            late_weight=weight,
            late_base=late_base,
            priorities=tuple(priorities),
            base=2 * nodes * largest(counted) + 1,
        )

    def _lateness(self, subject: CodeArray) -> tuple[IntArray, IntArray]:
        """Return how many days late goods on each arc are, and what that weighs if not money."""
        if not any(block.late.any() for block in self.blocks):
            none = np.broadcast_to(np.int64(0), subject.shape)
            return none, none
        late = np.concatenate([block.late for block in self.blocks])
        weight = np.zeros_like(late)
        serving = np.flatnonzero(late)
        weight[serving] = late[serving] * self.groups.late_weight(subject[serving])
        return late, weight


def item_arcs(  # noqa: PLR0913 - the tables of one item
    network: Network,
    options: Options,
    item: int,
    *,
    use: LaneUse,
    book: RuleBook,
    movements: Movements | None = None,
) -> ArcList:
    """Build the arcs of one item; ``movements`` are those of a network with dates."""
    bounds = lane_bounds(network, item, use.rows(item), book, movements=movements)
    lanes = with_segments(bounds, network, item)
    stock, groups = stock_of(network, item), groups_of(network, item, options)
    if movements is not None:
        # A departure of yesterday makes no yesterday on which stock could serve.
        own = np.isin(groups.site, stock.site)
        first = np.maximum(groups.earliest, first_day(network.head))
        groups = replace(groups, earliest=np.where(own, first, groups.earliest))
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
    tail, head = layout.lane_ends(network.lanes.origin[lanes.at])
    arcs.add(
        Kind.LANE,
        tail,
        head,
        np.arange(lanes.rows.shape[0], dtype=np.int32) if lanes.first is None else lanes.first,
        minimum=lanes.minimum,
        capacity=lanes.capacity,
        money=lanes.money,
    )
    _add_stock(arcs)
    _add_sites(arcs, network, item)
    add_serving(arcs, network, item, use)
    _add_wanting(arcs, shortages=options.shortages == "allow")
    return arcs


def _add_stock(arcs: ArcList) -> None:
    """Add what can be drawn, and what of it is kept."""
    stock, layout = arcs.stock, arcs.layout
    days = layout.places
    tiers = np.arange(stock.site.shape[0])
    plain, kept = tiers[layout.stock < 0], tiers[layout.stock >= 0]
    root = np.array(ROOT)
    place = days.first[stock.site[plain]]
    there = np.ones(plain.shape[0], np.bool_)
    if days.day is not None:
        there = stock.from_day[plain] <= days.day[place]
    arcs.add(
        Kind.SUPPLY,
        root,
        layout.inside[place],
        plain,
        capacity=np.where(there, stock.steps[plain], 0),
        money=stock.money.at(plain),
    )
    at = layout.stock[kept]
    arcs.add(Kind.SUPPLY, root, at, kept, capacity=stock.steps[kept])
    tier, place = each_place(days, stock.site[kept])
    tier = kept[tier]
    if days.day is not None:
        open_ = stock.from_day[tier] <= days.day[place]
        tier, place = tier[open_], place[open_]
    arcs.add(Kind.DRAW, layout.stock[tier], layout.inside[place], tier, money=stock.money.at(tier))
    keep_of_site = dict(zip(stock.kept_site.tolist(), layout.keep.tolist(), strict=True))
    keep = np.array([keep_of_site.get(site, -1) for site in stock.site[kept].tolist()], np.int64)
    arcs.add(Kind.KEPT, at[keep >= 0], keep[keep >= 0], kept[keep >= 0])


def _add_sites(arcs: ArcList, network: Network, item: int) -> None:
    """Add what passes a place: handling, throughput limits, closures."""
    layout = arcs.layout
    places, site_of = layout.relevant, layout.places.site
    thing = network.items[item]
    handling = Rationals.given(
        [network.sites[site].handling(thing.id) * thing.step for site in site_of[places].tolist()]
    )
    arcs.add(
        Kind.THROUGH,
        layout.inside[places],
        layout.outside[places],
        places,
        capacity=np.where(
            layout.closed[site_of[places]], 0, layout.limit["through"][site_of[places]]
        ),
        money=handling,
    )
    sending = places[layout.sent[places] >= 0]
    arcs.add(
        Kind.LEAVE,
        layout.outside[sending],
        layout.sent[sending],
        sending,
        capacity=layout.limit["sent"][site_of[sending]],
    )
    _add_storage(arcs, network, item)
    node, place, _ = layout.arrivals
    site = site_of[place]
    joined = np.flatnonzero(~layout.apart[site])
    arcs.add(
        Kind.ARRIVE,
        node[joined],
        layout.inside[place[joined]],
        place[joined],
        capacity=layout.limit["received"][site[joined]],
    )
    passing = np.flatnonzero(layout.apart[site] & layout.passes_on[site])
    arcs.add(
        Kind.PASS,
        node[passing],
        layout.sent[place[passing]],
        place[passing],
        capacity=np.where(layout.closed[site[passing]], 0, UNLIMITED),
        money=handling.at(np.searchsorted(places, place[passing])),
    )


def _add_storage(arcs: ArcList, network: Network, item: int) -> None:
    """Add that goods at a cross-dock wait for lanes of later days, where they may."""
    layout, days = arcs.layout, arcs.layout.places
    if days.day is None or "storage" not in network.head:
        return
    waits = storing_sites(network, item) & layout.passes_on
    place = np.flatnonzero(waits[days.site[:-1]] & (days.site[:-1] == days.site[1:]))
    # What is kept apart from stock passes to where lanes leave; else it waits before that.
    at = np.where(layout.apart[days.site], layout.sent, layout.outside)
    arcs.add(Kind.STORE, at[place], at[place + 1], place)


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
