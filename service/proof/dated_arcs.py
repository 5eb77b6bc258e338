"""The formal network of one item on its days (DEVELOPERS.md, section 6), as the proof builds it.

What a site is made of stands here once for each of its places; what is drawn, kept and wanted
stands once. The lanes of the network are its movements (``calendar.py``).
"""

import itertools
from collections.abc import Mapping
from dataclasses import replace
from fractions import Fraction

import numpy as np

from service.network.columns import CodeArray, IntArray, Network
from service.network.options import Options
from service.proof.arc_build import NO_MONEY, Build, Node
from service.proof.arcs import ItemArcs, as_columns, item_arcs
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
    build = _Build(
        network,
        item,
        stock=stock,
        wanted=wanted,
        shortage=options.shortages == "allow",
        places=SiteDays(calendar, rulings, item, rows, stock, wanted),
    )
    for site, made in sides.items():
        arrivals = build.places.origins(site) if made.by_origin else {}
        build.site(site, made, arrivals=arrivals)
        if site in stock:
            build.stock(site, stock[site])
            build.keep(site, stock[site])
    for site in storing(network, network.items[item].id):
        if site in sides:
            build.storage(site, sides[site])
    for group in wanted.groups:
        build.group(group, sides[group.site])
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
        priorities=build.priorities,
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


class _Build(Build):
    """Collects the nodes and arcs of an item on the days of each site."""

    def __init__(  # noqa: PLR0913 - what any network is built of, and its days
        self,
        network: Network,
        item: int,
        *,
        stock: Mapping[int, Stock],
        wanted: Wanted,
        shortage: bool,
        places: SiteDays,
    ) -> None:
        """Start with the root alone."""
        super().__init__(network, item, stock=stock, wanted=wanted, shortage=shortage)
        self.late: dict[int, Late] = {}
        self.places = places

    def on(self, site: int, side: str, day: int, qualifier: str | None = None) -> int:
        """Return the position of a node on a day, which is made if it is not there."""
        return self.node(site, on_day(side, date_of(day)), qualifier)

    def site(self, site: int, made: SiteSides, *, arrivals: Mapping[int, set[int]]) -> None:
        """Add what a site is made of, on each of its places."""
        handling = self._handling[site]
        for day in self.places.days[site]:
            entry, exit_ = self.on(site, "in", day), self.on(site, "out", day)
            key: tuple[object, ...] = (site, day)
            self.add("handle", entry, exit_, capacity=made.through, money=handling, key=key)
            if made.has_sent:
                sent = self.on(site, "sent", day)
                self.add("leave", exit_, sent, capacity=made.sent, key=key)
            for origin in made.received_from:
                if origin is not None and origin not in arrivals.get(day, ()):
                    continue
                received = self.on(site, "received", day, self.id_of(origin))
                if not made.apart:
                    self.add("enter", received, entry, capacity=made.received, key=key)
                elif made.passes:
                    self.add(
                        "pass",
                        received,
                        self.on(site, "sent", day),
                        capacity=made.past,
                        money=handling,
                        key=(site, self.id_of(origin), date_of(day)),
                    )

    def storage(self, site: int, made: SiteSides) -> None:
        """Let what is about to leave a cross-dock wait for its next day."""
        side, days = "sent" if made.apart else "out", self.places.days[site]
        for before, after in itertools.pairwise(days):
            tail, head = self.on(site, side, before), self.on(site, side, after)
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
                entry, key = self.on(site, "in", days[0]), (site, tier, date_of(days[0]))
                self.add("draw", 0, entry, capacity=there, money=money, key=key)
                continue
            shelf = self.node(site, "stock", str(tier))
            self.add("supply", 0, shelf, capacity=steps, key=(site, tier))
            for day in days:
                if first <= day:
                    entry, key = self.on(site, "in", day), (site, tier, date_of(day))
                    self.add("draw", shelf, entry, money=money, key=key)

    def group(self, group: Group, made: SiteSides) -> None:
        """Add what a group wants, and the ways in which goods reach it in time or late."""
        site, label = group.site, group.label
        node = self.node(site, "demand", label)
        for day in self.places.days[site]:
            late = lateness(day, (group.earliest or 0, group.due, group.latest))
            if late is None:
                continue
            if group.origins is None or site in group.origins:
                key: tuple[object, ...] = (site, label, "out", None, date_of(day))
                self._serve(group, self.on(site, "out", day), node, late=late, key=key)
            for origin in made.received_from if made.apart else ():
                name = self.id_of(origin)
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
        self.want(group, node)

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
            origin = self.id_of(int(lanes.origin[rows[position]]))
            side = on_day("received", date_of(key % DAYS))
            head[position] = self.place[(key // DAYS, side, origin)]
        return tail, head


def _looked_up(keys: IntArray, known: Mapping[int, int]) -> CodeArray:
    """Return what is known of each key."""
    distinct, position = np.unique(keys, return_inverse=True)
    found: CodeArray = np.array([known[key] for key in distinct.tolist()], dtype=np.int32)[position]
    return found
