"""Nodes and arcs of a formal network, and what is added alike with days and without."""

from collections.abc import Mapping
from fractions import Fraction
from typing import Literal, NamedTuple

from service.network.columns import Network
from service.proof.groups import Group, Wanted
from service.proof.sides import UNLIMITED
from service.proof.stock import Stock

Kind = Literal[
    "supply", "draw", "keep", "enter", "handle", "leave", "store", "serve", "pass", "want", "short"
]


class Node(NamedTuple):
    """A place in the formal network; the root has site -1."""

    site: int
    side: str
    qualifier: str | None


ROOT = Node(-1, "root", None)

# What most arcs that are no lanes cost: known by itself, without looking at a fraction.
NO_MONEY = Fraction(0)


class Arc(NamedTuple):
    """An arc that is no lane. ``money`` is per step; ``rank`` is 1 for the first priority, or 0.

    ``capacity`` is -1 where there is no limit. ``key`` says what a certificate calls its flow.
    """

    kind: Kind
    tail: int
    head: int
    minimum: int
    capacity: int
    money: Fraction
    rank: int
    key: tuple[object, ...]


class Build:
    """Collects the nodes and arcs of one item; node 0 is the root.

    ``priorities`` are those that occur, ascending; with ``shortage`` all that is wanted may be
    short.
    """

    def __init__(
        self,
        network: Network,
        item: int,
        *,
        stock: Mapping[int, Stock],
        wanted: Wanted,
        shortage: bool,
    ) -> None:
        """Start with the root alone."""
        thing = network.items[item]
        self.step = thing.step
        occurring = {group.priority for group in wanted.groups if group.priority} | {
            held.keep_priority for held in stock.values() if held.keep_steps
        }
        self.priorities = tuple(sorted(occurring))
        # Plain tuples are made three times as fast as nodes, and equal them.
        self.place: dict[tuple[int, str, str | None], int] = {ROOT: 0}
        self.arcs: list[Arc] = []
        self._network = network
        self._shortage = shortage
        self._handling = [
            cost * self.step if (cost := site.handling(thing.id)) else NO_MONEY
            for site in network.sites
        ]

    def node(self, site: int, side: str, qualifier: str | None = None) -> int:
        """Return the position of a node, which is made if it is not there."""
        return self.place.setdefault((site, side, qualifier), len(self.place))

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

    def keep(self, site: int, held: Stock) -> None:
        """Add what should stay of a site's stock, which is wanted like a demand."""
        if not held.keep_steps:
            return
        keep = self.node(site, "keep")
        for tier in range(1, len(held.tier_cost) + 1):
            self.add("keep", self.node(site, "stock", str(tier)), keep, key=(site, tier))
        steps = held.keep_steps
        self.add("want", keep, 0, minimum=steps, capacity=steps, key=())
        if self._shortage:
            rank = self.priorities.index(held.keep_priority) + 1
            self.add("short", 0, keep, rank=rank, key=(site, None))

    def want(self, group: Group, node: int) -> None:
        """Add what a group takes out of its node, and what of it may be short."""
        # Every group has these, so that they are added without names.
        self.arcs.append(Arc("want", node, 0, group.wanted, group.wanted, NO_MONEY, 0, ()))
        if self._shortage:
            rank = self.priorities.index(group.priority) + 1 if group.priority else 0
            cost, key = group.shortage_cost, (group.site, group.label)
            money = cost * self.step if cost else NO_MONEY
            self.arcs.append(Arc("short", 0, node, 0, UNLIMITED, money, rank, key))

    def id_of(self, site: int | None) -> str | None:
        """Return the id of a site, None for none."""
        return None if site is None else self._network.sites[site].id
