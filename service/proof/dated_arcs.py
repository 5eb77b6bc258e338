"""The formal network of one item on its days (DEVELOPERS.md, section 6), as the proof builds it.

What a site is made of stands here once for each of its places; what is drawn, kept and wanted
stands once. The lanes of the network are its movements (``calendar.py``).
"""

import itertools
from collections.abc import Mapping, Sequence
from dataclasses import replace
from fractions import Fraction

import numpy as np

from service.network.columns import CodeArray, IntArray, Network
from service.network.options import Options
from service.proof.arcs import NO_MONEY, Arc, ItemArcs, Kind, Node, as_columns, item_arcs
from service.proof.calendar import Calendar, closed_departures, date_of, day_of, on_day, storing
from service.proof.groups import Group, Late, Wanted, wanted_of
from service.proof.rulings import LaneLimits, Rulings, measures_on
from service.proof.sides import UNLIMITED, SiteSides, site_sides
from service.proof.site_days import DAYS, SiteDays, lateness
from service.proof.stock import Stock, stock_of
from service.proof.usable import usable_lanes


def arcs_of(calendar: Calendar, options: Options, rulings: Rulings, item: int) -> ItemArcs:
    """Return the formal network of ``item``, on days where its network has any."""
    if calendar.dated:
        return dated_item_arcs(calendar, options, rulings, item)
    return item_arcs(calendar.network, options, rulings, item)


def dated_item_arcs(calendar: Calendar, options: Options, rulings: Rulings, item: int) -> ItemArcs:
    """Return the formal network of ``item``; raise ``UnusableNetworkError`` if there is none."""
    network = calendar.network
    # Which lanes are of use, and whose stock may come over them, is not a matter of dates.
    usable = usable_lanes(calendar.stated, item)
    rows = np.flatnonzero(np.isin(calendar.lane, usable))
    measures_on(network, item, rows)
    stock = stock_of(network, item)
    wanted = _from_today(calendar, wanted_of(network, options, item), stock)
    sides = site_sides(
        network,
        rulings,
        item,
        rows=rows,
        stock=stock,
        wanted=wanted,
        ways=(calendar.stated, usable),
    )
    build = _Build(calendar, item, places=SiteDays(calendar, rulings, item, rows, stock, wanted))
    occurring = {group.priority for group in wanted.groups if group.priority} | {
        held.keep_priority for held in stock.values() if held.keep_steps
    }
    priorities = tuple(sorted(occurring))
    shortage = options.shortages == "allow"
    for site, made in sides.items():
        arrivals = build.places.origins(site) if made.by_origin else {}
        build.site(site, made, arrivals=arrivals)
        if site in stock:
            build.stock(site, stock[site])
            build.keep(site, stock[site], priorities=priorities, shortage=shortage)
    for site in storing(network, network.items[item].id):
        if site in sides:
            build.storage(site, sides[site])
    for group in wanted.groups:
        build.group(group, sides[group.site], priorities=priorities, shortage=shortage)
    tail, head = build.lane_ends(rows, sides)
    return ItemArcs(
        item=item,
        step=build.step,
        rows=rows,
        lane_tail=tail,
        lane_head=head,
        limits=_limits(network, rulings, item, rows),
        arcs=tuple(build.arcs),
        others=as_columns(build.arcs),
        nodes=tuple(Node(*key) for key in build.place),
        place=build.place,
        priorities=priorities,
        stock=stock,
        wanted=wanted,
        late=build.late,
    )


def _from_today(calendar: Calendar, wanted: Wanted, stock: Mapping[int, Stock]) -> Wanted:
    """Return what is wanted, served no earlier than plan and cut-off where there is stock."""
    head = calendar.network.head
    first = min(calendar.today, day_of(str(head.get("planned_at", head["cut_off"]))))
    groups = tuple(
        group._replace(earliest=max(group.earliest or 0, first)) if group.site in stock else group
        for group in wanted.groups
    )
    return replace(wanted, groups=groups)


def _limits(network: Network, rulings: Rulings, item: int, rows: IntArray) -> LaneLimits:
    """Return the limits on movements, of which departures that closed carry nothing."""
    limits = rulings.lane_limits(network, item, rows)
    gone = closed_departures(network, rows)
    if not gone.any():
        return limits
    minimum, capacity = limits.minimum.copy(), limits.capacity.copy()
    minimum[gone] = 0
    capacity[gone] = 0
    return LaneLimits(minimum=minimum, capacity=capacity)


class _Build:
    """Collects nodes and arcs; node 0 is the root."""

    def __init__(self, calendar: Calendar, item: int, *, places: SiteDays) -> None:
        """Start with the root alone."""
        network = calendar.network
        self.step = network.items[item].step
        self.place: dict[tuple[int, str, str | None], int] = {(-1, "root", None): 0}
        self.arcs: list[Arc] = []
        self.late: dict[int, Late] = {}
        self.places = places
        self._network = network
        name = network.items[item].id
        self._handling = [site.handling(name) * self.step for site in network.sites]

    def node(
        self, site: int, side: str, day: int | None = None, qualifier: str | None = None
    ) -> int:
        """Return the position of a node, which is made if it is not there."""
        called = on_day(side, None if day is None else date_of(day))
        return self.place.setdefault((site, called, qualifier), len(self.place))

    def add(  # noqa: PLR0913 - an arc has that many numbers
        self,
        kind: Kind,
        tail: int,
        head: int,
        *,
        minimum: int = 0,
        capacity: int = UNLIMITED,
        money: Fraction = NO_MONEY,
        rank: int = 0,
        key: tuple[object, ...],
    ) -> None:
        """Add an arc from ``tail`` to ``head``."""
        money = money or NO_MONEY
        self.arcs.append(Arc(kind, tail, head, minimum, capacity, money, rank, key))

    def site(self, site: int, made: SiteSides, *, arrivals: Mapping[int, set[int]]) -> None:
        """Add what a site is made of, on each of its places."""
        handling = self._handling[site]
        for day in self.places.days[site]:
            entry, exit_ = self.node(site, "in", day), self.node(site, "out", day)
            key: tuple[object, ...] = (site, day)
            self.add("handle", entry, exit_, capacity=made.through, money=handling, key=key)
            if made.has_sent:
                sent = self.node(site, "sent", day)
                self.add("leave", exit_, sent, capacity=made.sent, key=key)
            for origin in made.received_from:
                if origin is not None and origin not in arrivals.get(day, ()):
                    continue
                received = self.node(site, "received", day, self._id(origin))
                if not made.apart:
                    self.add("enter", received, entry, capacity=made.received, key=key)
                elif made.passes:
                    self.add(
                        "pass",
                        received,
                        self.node(site, "sent", day),
                        capacity=made.past,
                        money=handling,
                        key=(site, self._id(origin), date_of(day)),
                    )

    def storage(self, site: int, made: SiteSides) -> None:
        """Let what is about to leave a cross-dock wait for its next day."""
        side, days = "sent" if made.apart else "out", self.places.days[site]
        for before, after in itertools.pairwise(days):
            tail, head = self.node(site, side, before), self.node(site, side, after)
            self.add("store", tail, head, key=(site, date_of(before)))

    def stock(self, site: int, held: Stock) -> None:
        """Add the tiers of a site's stock, each on the places from its first day on."""
        days = self.places.days[site]
        for tier, (cost, steps, first) in enumerate(
            zip(held.tier_cost, held.tier_steps, held.tier_from, strict=True), start=1
        ):
            money = cost * self.step
            if not held.keep_steps and len(days) == 1:
                there = steps if first <= days[0] else 0
                entry, key = self.node(site, "in", days[0]), (site, tier, date_of(days[0]))
                self.add("draw", 0, entry, capacity=there, money=money, key=key)
                continue
            shelf = self.node(site, "stock", None, str(tier))
            self.add("supply", 0, shelf, capacity=steps, key=(site, tier))
            for day in days:
                if first <= day:
                    entry, key = self.node(site, "in", day), (site, tier, date_of(day))
                    self.add("draw", shelf, entry, money=money, key=key)

    def keep(self, site: int, held: Stock, *, priorities: Sequence[int], shortage: bool) -> None:
        """Add what should stay of a site's stock, which is wanted like a demand."""
        if not held.keep_steps:
            return
        keep, steps = self.node(site, "keep"), held.keep_steps
        for tier in range(1, len(held.tier_cost) + 1):
            shelf = self.node(site, "stock", None, str(tier))
            self.add("keep", shelf, keep, key=(site, tier))
        self.add("want", keep, 0, minimum=steps, capacity=steps, key=())
        if shortage:
            rank = priorities.index(held.keep_priority) + 1
            self.add("short", 0, keep, rank=rank, key=(site, None))

    def group(
        self, group: Group, made: SiteSides, *, priorities: Sequence[int], shortage: bool
    ) -> None:
        """Add what a group wants, and the ways in which goods reach it in time or late."""
        site, label = group.site, group.label
        node = self.node(site, "demand", None, label)
        for day in self.places.days[site]:
            late = lateness(day, (group.earliest or 0, group.due, group.latest))
            if late is None:
                continue
            if group.origins is None or site in group.origins:
                key: tuple[object, ...] = (site, label, "out", None, date_of(day))
                self._serve(group, self.node(site, "out", day), node, late=late, key=key)
            for origin in made.received_from if made.apart else ():
                name = self._id(origin)
                received = self.place.get((site, on_day("received", date_of(day)), name))
                if received is None:
                    continue
                if group.origins is not None and not made.allowed(origin, group.origins):
                    continue
                key = (site, label, "received", name, date_of(day))
                self._serve(
                    group,
                    received,
                    node,
                    late=late,
                    key=key,
                    capacity=made.past,
                    handling=self._handling[site],
                )
        self.add("want", node, 0, minimum=group.wanted, capacity=group.wanted, key=())
        if shortage:
            rank = priorities.index(group.priority) + 1 if group.priority else 0
            money = (group.shortage_cost or NO_MONEY) * self.step
            self.add("short", 0, node, money=money, rank=rank, key=(site, label))

    def _serve(  # noqa: PLR0913 - an arc has that many numbers
        self,
        group: Group,
        tail: int,
        head: int,
        *,
        late: int,
        key: tuple[object, ...],
        capacity: int = UNLIMITED,
        handling: Fraction = NO_MONEY,
    ) -> None:
        """Add a way to a group that is so many days late, which weighs or costs something."""
        weight, money = 0, NO_MONEY
        if late and group.late_cost is not None:
            money = late * group.late_cost * self.step
        elif late:
            weight = late * (10 - group.priority if group.priority else 1)
        if late:
            self.late[len(self.arcs)] = Late(days=late, weight=weight, money=money)
        self.add("serve", tail, head, capacity=capacity, money=handling + money, key=key)

    def lane_ends(
        self, rows: IntArray, sides: Mapping[int, SiteSides]
    ) -> tuple[CodeArray, CodeArray]:
        """Return the nodes that the movements ``rows`` leave and enter."""
        lanes = self._network.lanes
        leaving, entering = (
            self.places.of(keys) for keys in (self.places.leaving, self.places.coming)
        )
        leaves: dict[int, int] = {}
        enters: dict[int, int] = {}
        for site, made in sides.items():
            for day in self.places.days[site]:
                date, key = date_of(day), site * DAYS + day
                side = "sent" if made.has_sent else "out"
                leaves[key] = self.place[(site, on_day(side, date), None)]
                received = (site, on_day("received", date), None)
                inside = self.place[(site, on_day("in", date), None)]
                enters[key] = -1 if made.by_origin else self.place.get(received, inside)
        tail, head = _looked_up(leaving, leaves), _looked_up(entering, enters)
        for position in np.flatnonzero(head < 0).tolist():
            key = int(entering[position])
            origin = self._id(int(lanes.origin[rows[position]]))
            side = on_day("received", date_of(key % DAYS))
            head[position] = self.place[(key // DAYS, side, origin)]
        return tail, head

    def _id(self, site: int | None) -> str | None:
        """Return the id of a site, None for none."""
        return None if site is None else self._network.sites[site].id


def _looked_up(keys: IntArray, known: Mapping[int, int]) -> CodeArray:
    """Return what is known of each key."""
    distinct, position = np.unique(keys, return_inverse=True)
    found: CodeArray = np.array([known[key] for key in distinct.tolist()], dtype=np.int32)[position]
    return found
