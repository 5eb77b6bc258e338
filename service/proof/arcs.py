"""The formal network of one item, built from the columns by code that planning does not share.

Goods circulate: from the root to stock, over lanes to the places where they are wanted, and back to
the root. What is short comes to where it is wanted straight from the root. Quantities are in steps
of the item. Every lane that the item can use has its arc, also one that no solver was shown.
"""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from functools import partial
from typing import NamedTuple

import numpy as np

from service.network.columns import CodeArray, IntArray, Network
from service.network.options import Options
from service.proof.arc_build import NO_MONEY, Arc, Build, Node
from service.proof.exact import Whole, joined, magnitude, whole
from service.proof.groups import Group, Late, Wanted, wanted_of
from service.proof.rulings import LaneLimits, Rulings, measures_on
from service.proof.sides import UNLIMITED, SiteSides, site_sides
from service.proof.stock import Stock, stock_of
from service.proof.usable import of_rows, usable_lanes

# Six columns of so many arcs fit 4 MiB of cache (measured: twice as fast as whole columns).
PART_ARCS = 2**16


class Part(NamedTuple):
    """Some arcs as columns: the nodes they leave and enter, their least and most flow."""

    tail: CodeArray
    head: CodeArray
    minimum: Whole
    capacity: Whole


class Costs(NamedTuple):
    """What a step costs on each lane, and on each arc that is none."""

    lanes: Whole
    others: Whole

    def magnitude(self) -> int:
        """Return the largest absolute cost, 0 if there are none."""
        return max(magnitude(self.lanes), magnitude(self.others))


@dataclass(frozen=True, slots=True, kw_only=True)
class ItemArcs:
    """The formal network of one item.

    ``rows`` are the usable lanes (shape (lanes,), ascending), which are the first arcs; ``arcs``
    are the others. ``lane_tail`` and ``lane_head`` are positions in ``nodes``, of which the root is
    the first. ``others`` are ``arcs`` as columns. ``priorities`` are those that occur, ascending.
    ``late`` has what comes late, by position in ``arcs``; its money is part of the arc's.
    """

    item: int
    step: Fraction
    rows: IntArray
    lane_tail: CodeArray
    lane_head: CodeArray
    limits: LaneLimits
    arcs: tuple[Arc, ...]
    others: Part
    nodes: tuple[Node, ...]
    place: Mapping[tuple[int, str, str | None], int]
    priorities: tuple[int, ...]
    stock: Mapping[int, Stock]
    wanted: Wanted
    late: Mapping[int, Late] = field(default_factory=dict)

    def tails(self) -> CodeArray:
        """Return the node that each arc leaves, lanes first."""
        return np.append(self.lane_tail, self.others.tail)

    def heads(self) -> CodeArray:
        """Return the node that each arc enters, lanes first."""
        return np.append(self.lane_head, self.others.head)

    def minimums(self) -> Whole:
        """Return the least flow on each arc, lanes first."""
        return joined([self.limits.minimum, self.others.minimum])

    def capacities(self) -> Whole:
        """Return the most flow on each arc, lanes first; -1 is unlimited."""
        return joined([self.limits.capacity, self.others.capacity])

    def ends(self, positions: IntArray) -> tuple[CodeArray, CodeArray]:
        """Return the nodes that the arcs at ``positions``, ascending, leave and enter."""
        lanes = len(self.rows)
        split = int(np.searchsorted(positions, lanes))
        on_lanes, others = positions[:split], positions[split:] - lanes
        return (
            np.append(self.lane_tail[on_lanes], self.others.tail[others]),
            np.append(self.lane_head[on_lanes], self.others.head[others]),
        )

    def parts(self) -> Iterator[tuple[int, "Part"]]:
        """Yield all arcs in parts that fit a processor's cache, and where each part begins."""
        lanes = len(self.rows)
        for first in range(0, lanes, PART_ARCS):
            here = slice(first, min(first + PART_ARCS, lanes))
            yield (
                first,
                Part(
                    self.lane_tail[here],
                    self.lane_head[here],
                    self.limits.minimum[here],
                    self.limits.capacity[here],
                ),
            )
        yield lanes, self.others


def item_arcs(network: Network, options: Options, rulings: Rulings, item: int) -> ItemArcs:
    """Return the formal network of ``item``; raise ``UnusableNetworkError`` if there is none."""
    rows = usable_lanes(network, item)
    # Raises here, and not where costs are scaled, if a lane's measure says nothing of the item.
    measures_on(network, item, rows)
    limits = rulings.lane_limits(network, item, rows)
    stock = stock_of(network, item)
    wanted = wanted_of(network, options, item)
    sides = site_sides(network, rulings, item, rows=rows, stock=stock, wanted=wanted)
    build = _Build(network, item, stock=stock, wanted=wanted, shortage=options.shortages == "allow")
    for site, made in sides.items():
        build.site(site, made)
        if site in stock:
            build.stock(site, stock[site])
            build.keep(site, stock[site])
    for group in wanted.groups:
        build.group(group, sides[group.site])
    tail, head = build.lane_ends(rows, sides)
    return ItemArcs(
        item=item,
        step=build.step,
        rows=rows,
        lane_tail=tail,
        lane_head=head,
        limits=limits,
        arcs=tuple(build.arcs),
        others=as_columns(build.arcs),
        # Node itself would be called through Python; this makes the same thing of each tuple.
        nodes=tuple(map(partial(tuple.__new__, Node), build.place)),
        place=build.place,
        priorities=build.priorities,
        stock=stock,
        wanted=wanted,
    )


def as_columns(arcs: Sequence[Arc]) -> Part:
    """Return ends and limits of arcs that are no lanes as columns."""
    return Part(
        np.array([arc.tail for arc in arcs], dtype=np.int32),
        np.array([arc.head for arc in arcs], dtype=np.int32),
        whole([arc.minimum for arc in arcs]),
        whole([arc.capacity for arc in arcs]),
    )


class _Build(Build):
    """Collects the nodes and arcs of an item whose network says nothing of dates."""

    def site(self, site: int, made: SiteSides) -> None:
        """Add what a site is made of: receiving, handling and sending."""
        entry, exit_ = self.node(site, "in"), self.node(site, "out")
        handling = self._handling[site]
        key: tuple[object, ...] = (site,)
        # Every site has it, so that it is added without names.
        self.arcs.append(Arc("handle", entry, exit_, 0, made.through, handling, 0, key))
        if made.has_sent:
            self.add("leave", exit_, self.node(site, "sent"), capacity=made.sent, key=key)
        for origin in made.received_from:
            received = self.node(site, "received", self.id_of(origin))
            if not made.apart:
                self.add("enter", received, entry, capacity=made.received, key=key)
            elif made.passes:
                self.add(
                    "pass",
                    received,
                    self.node(site, "sent"),
                    capacity=made.past,
                    money=handling,
                    key=(site, self.id_of(origin)),
                )

    def stock(self, site: int, held: Stock) -> None:
        """Add the tiers of a site's stock, straight into it unless some of it should stay."""
        entry = self.node(site, "in")
        for tier, (cost, steps) in enumerate(
            zip(held.tier_cost, held.tier_steps, strict=True), start=1
        ):
            money, key = cost * self.step, (site, tier)
            if held.keep_steps:
                node = self.node(site, "stock", str(tier))
                self.add("supply", 0, node, capacity=steps, key=key)
                self.add("draw", node, entry, money=money, key=key)
            else:
                self.add("draw", 0, entry, capacity=steps, money=money, key=key)

    def group(self, group: Group, made: SiteSides) -> None:
        """Add what a group wants, and the ways in which goods at its site reach it."""
        site, label = group.site, group.label
        node = self.node(site, "demand", label)
        if group.origins is None or site in group.origins:
            key: tuple[object, ...] = (site, label, "out", None)
            exit_ = self.place[(site, "out", None)]
            self.arcs.append(Arc("serve", exit_, node, 0, UNLIMITED, NO_MONEY, 0, key))
        if made.apart:
            self._serve_arrived(group, made, node)
        self.want(group, node)

    def _serve_arrived(self, group: Group, made: SiteSides, node: int) -> None:
        """Add the ways from where goods are received at the site of a group."""
        site, label = group.site, group.label
        for origin in made.received_from:
            if group.origins is not None and not made.allowed(origin, group.origins):
                continue
            name = self.id_of(origin)
            self.add(
                "serve",
                self.node(site, "received", name),
                node,
                capacity=made.past,
                money=self._handling[site],
                key=(site, label, "received", name),
            )

    def lane_ends(
        self, rows: IntArray, sides: Mapping[int, SiteSides]
    ) -> tuple[CodeArray, CodeArray]:
        """Return the nodes that the lanes ``rows`` leave and enter."""
        lanes, sites = self._network.lanes, len(self._network.sites)
        leaving = np.full(sites, -1, dtype=np.int32)
        entering = np.full(sites, -1, dtype=np.int32)
        for site, made in sides.items():
            leaving[site] = self.place[(site, "sent" if made.has_sent else "out", None)]
            if made.by_origin:
                continue
            received = (site, "received", None)
            entering[site] = self.place.get(received, self.place[(site, "in", None)])
        tail = leaving[of_rows(lanes.origin, rows)]
        head = entering[of_rows(lanes.destination, rows)]
        by_origin = any(made.by_origin for made in sides.values())
        for position in np.flatnonzero(head < 0).tolist() if by_origin else ():
            row = int(rows[position])
            origin = self.id_of(int(lanes.origin[row]))
            head[position] = self.place[(int(lanes.destination[row]), "received", origin)]
        return tail, head
