"""Why an order line is short: the one reason that a planner can act on, and who went first.

The reasons that need no dates, in the order in which they are tried for a demand group (or kept
stock) that is short by s:

``no_lane``      no way leads from any stock to it, capacities ignored and closures open.
``closed``       ways lead to it, but only through closures.
Then: could it be served in full if no other demand counted? All minimums still hold.
If so:
``not_worth_it`` it competes in money and could be served without taking from a priority, only for
                 more than it is worth;
``outranked``    otherwise: others went first, the largest of which is named.
If not, one kind of limit at a time is lifted, still without other demand, and the first that
serves it in full is the reason:
``no_stock`` (supply), ``lane_full`` (capacities of lanes), ``site_full`` (throughput limits),
``rule`` (fixed quantities and minimums). Where none alone does, it is the first under which more
would be served, else ``no_stock``. An item without any stock is ``no_stock``, too.
"""

from dataclasses import dataclass
from enum import StrEnum
from functools import cached_property

import numpy as np

from service.network.columns import BoolArray, IntArray
from service.planning.arcs import ROOT, UNLIMITED, Arcs, Kind
from service.planning.forced_flow import maximum_flow, reachable_back
from service.planning.groups import IN_MONEY
from service.planning.solve import ItemFlow


class Reason(StrEnum):
    """Why something is short."""

    NO_LANE = "no_lane"
    CLOSED = "closed"
    NO_STOCK = "no_stock"
    LANE_FULL = "lane_full"
    SITE_FULL = "site_full"
    RULE = "rule"
    OUTRANKED = "outranked"
    NOT_WORTH_IT = "not_worth_it"


RELIEFS = (Reason.NO_STOCK, Reason.LANE_FULL, Reason.SITE_FULL, Reason.RULE)


@dataclass(frozen=True, slots=True, kw_only=True)
class Bounds:
    """Minimums and capacities of an item's arcs, as they are or with one kind of limit lifted."""

    minimum: IntArray
    capacity: IntArray


class Reasons:
    """Answers for one solved item; what all its groups share is found once."""

    def __init__(self, solved: ItemFlow) -> None:
        """Prepare for the plan of one item."""
        self._solved = solved
        self._own = solved.own
        self._arcs = solved.own.arcs
        self._forced = bool((self._arcs.minimum[solved.own.of_kind(Kind.LANE)] > 0).any())

    def reason(self, short_arc: int, missing: int) -> Reason:
        """Return why ``missing`` steps flow on the shortage arc at ``short_arc``."""
        node = int(self._arcs.head[short_arc])
        if not bool(self._own.stock.steps.any()):
            return Reason.NO_STOCK
        if not self._reached_open[node]:
            return Reason.NO_LANE
        if not self._reached[node]:
            return Reason.CLOSED
        want = int(self._arcs.minimum[self._want_of[node]])
        alone = self._alone(short_arc, self._as_is, want=want, missing=missing)
        if alone >= want:
            if self._in_money(short_arc) and self._spares_priorities(short_arc):
                return Reason.NOT_WORTH_IT
            return Reason.OUTRANKED
        more: Reason | None = None
        for relief in RELIEFS:
            if relief == Reason.RULE and not self._forced and not self._own.lanes.fixed.any():
                continue
            lifted = self._alone(short_arc, self._lifted(relief), want=want, missing=missing)
            if lifted >= want:
                return relief
            if lifted > alone and more is None:
                more = relief
        return more or Reason.NO_STOCK

    def went_first(self, short_arc: int) -> IntArray:
        """Return the demand nodes of equal or higher rank that share the bottleneck.

        The bottleneck is all that can still reach the short demand (MODEL.md, section 6): none of
        its supply, and nothing that could enter it, is left over.
        """
        node = int(self._arcs.head[short_arc])
        bottleneck = self._towards(node, without=self._shorts)
        own_rank = self._rank(short_arc)
        found = []
        for arc in self._shorts.tolist():
            other = int(self._arcs.head[arc])
            served = self._arcs.minimum[self._want_of[other]] - self._solved.flow[arc]
            if bottleneck[other] and served > 0 and self._rank(arc) <= own_rank:
                found.append(other)
        return np.array(found, np.int64)

    def _rank(self, short_arc: int) -> tuple[int, int]:
        """Return what decides who goes first: priority, then (in money) the dearest shortage."""
        if self._in_money(short_arc):
            return 10, -int(self._arcs.cost[short_arc])
        return self._priority(short_arc), 0

    def _priority(self, short_arc: int) -> int:
        """Return the priority of a shortage arc."""
        subject = int(self._own.subject[short_arc])
        if self._own.kind[short_arc] == Kind.KEEP_SHORT:
            return int(self._own.stock.kept_priority[subject])
        return int(self._own.groups.priority[subject])

    def _in_money(self, short_arc: int) -> bool:
        """Return whether a shortage arc competes in money."""
        return self._priority(short_arc) == IN_MONEY

    @cached_property
    def _shorts(self) -> IntArray:
        """Positions of all shortage arcs."""
        return self._own.of_kind(Kind.SHORT, Kind.KEEP_SHORT)

    @cached_property
    def _want_of(self) -> dict[int, int]:
        """The position of the arc that says what each demand node wants."""
        wants = self._own.of_kind(Kind.WANT, Kind.KEEP_WANT)
        return dict(zip(self._arcs.tail[wants].tolist(), wants.tolist(), strict=True))

    @cached_property
    def _goods(self) -> BoolArray:
        """Which arcs carry goods from stock to demand: all but wants and shortages."""
        carrying = np.ones(len(self._arcs), np.bool_)
        carrying[list(self._want_of.values())] = False
        carrying[self._shorts] = False
        return carrying

    @cached_property
    def _closures(self) -> BoolArray:
        """Which arcs a closure closes."""
        own = self._own
        shut = np.zeros(len(self._arcs), np.bool_)
        shut[: own.lanes.closed.shape[0]] = own.lanes.closed
        at_site = own.of_kind(Kind.THROUGH, Kind.PASS)
        shut[at_site] = own.layout.closed[own.subject[at_site]]
        serving = own.of_kind(Kind.SERVE_ARRIVED)
        shut[serving] = own.layout.closed[own.groups.site[own.subject[serving]]]
        return shut

    @cached_property
    def _reached_open(self) -> BoolArray:
        """Which nodes stock could reach if everything were open."""
        return self._reached_over(self._goods)

    @cached_property
    def _reached(self) -> BoolArray:
        """Which nodes stock could reach past the closures."""
        return self._reached_over(self._goods & ~self._closures)

    def _reached_over(self, usable: BoolArray) -> BoolArray:
        """Return which nodes a way over ``usable`` arcs leads to, from the root."""
        marked = np.zeros(self._own.node_count, np.bool_)
        marked[ROOT] = True
        reachable_back(self._arcs.head[usable], self._arcs.tail[usable], marked)
        return marked

    @cached_property
    def _as_is(self) -> Bounds:
        """The bounds of the plan."""
        return Bounds(minimum=self._arcs.minimum, capacity=self._arcs.capacity)

    def _lifted(self, relief: Reason) -> Bounds:
        """Return the bounds with one kind of limit lifted; closures always stay."""
        own = self._own
        minimum, capacity = self._arcs.minimum.copy(), self._arcs.capacity.copy()
        lanes = slice(0, own.lanes.rows.shape[0])
        if relief == Reason.NO_STOCK:
            capacity[own.of_kind(Kind.SUPPLY)] = UNLIMITED
        elif relief == Reason.LANE_FULL:
            capacity[lanes] = np.where(own.lanes.fixed, capacity[lanes], UNLIMITED)
        elif relief == Reason.SITE_FULL:
            capacity[own.of_kind(Kind.THROUGH, Kind.ARRIVE, Kind.LEAVE)] = UNLIMITED
        else:
            minimum[lanes] = 0
            capacity[lanes] = np.where(
                own.lanes.fixed, own.lanes.stated_capacity, capacity[lanes]
            )
        shut = self._closures
        return Bounds(
            minimum=np.where(shut, 0, minimum), capacity=np.where(shut, 0, capacity)
        )

    def _alone(self, short_arc: int, bounds: Bounds, *, want: int, missing: int) -> int:
        """Return how much of ``want`` can be served if no other demand counts."""
        node = int(self._arcs.head[short_arc])
        if self._forced:
            # Minimums hold: start from the plan, in which everything else may give way.
            return want - missing + self._rerouted(short_arc, bounds, most=missing)
        usable = np.flatnonzero(self._goods & (bounds.capacity != 0))
        tail, head = self._arcs.tail[usable], self._arcs.head[usable]
        before = np.zeros(self._own.node_count, np.bool_)
        before[node] = True
        reachable_back(tail, head, before)
        near = usable[before[head]]
        room = bounds.capacity[near]
        return _most(
            self._arcs.at(near),
            np.where(room == UNLIMITED, want, np.minimum(room, want)),
            node=node,
            nodes=self._own.node_count,
            most=want,
        )

    def _rerouted(self, short_arc: int, bounds: Bounds, *, most: int) -> int:
        """Return how much more could be served, whatever that takes from others."""
        flow = self._solved.flow
        lifted = Arcs(
            tail=self._arcs.tail,
            head=self._arcs.head,
            minimum=bounds.minimum,
            capacity=bounds.capacity,
            cost=self._arcs.cost,
        )
        more = lifted.can_take_more(flow)
        more[short_arc] = False
        less = lifted.can_give_up(flow)
        less[short_arc] = False
        room = np.where(bounds.capacity == UNLIMITED, most, bounds.capacity - flow)
        both = Arcs(
            tail=np.concatenate((self._arcs.tail[more], self._arcs.head[less])),
            head=np.concatenate((self._arcs.head[more], self._arcs.tail[less])),
            minimum=np.zeros(0, np.int64),
            capacity=np.zeros(0, np.int64),
            cost=np.zeros(0, np.int64),
        )
        return _most(
            both,
            np.minimum(np.concatenate((room[more], (flow - bounds.minimum)[less])), most),
            node=int(self._arcs.head[short_arc]),
            nodes=self._own.node_count,
            most=most,
        )

    def _towards(self, node: int, *, without: IntArray) -> BoolArray:
        """Return which nodes have a residual way to ``node``, some arcs left out both ways."""
        flow = self._solved.flow
        more, less = self._arcs.can_take_more(flow), self._arcs.can_give_up(flow)
        more[without] = False
        less[without] = False
        marked = np.zeros(self._own.node_count, np.bool_)
        marked[node] = True
        reachable_back(
            np.concatenate((self._arcs.tail[more], self._arcs.head[less])),
            np.concatenate((self._arcs.head[more], self._arcs.tail[less])),
            marked,
        )
        return marked

    def _spares_priorities(self, short_arc: int) -> bool:
        """Return whether more could be served without taking from any priority."""
        ranked = [arc for arc in self._shorts.tolist() if not self._in_money(arc)]
        without = np.array([*ranked, short_arc], np.int64)
        return bool(self._towards(int(self._arcs.head[short_arc]), without=without)[ROOT])


def _most(arcs: Arcs, room: IntArray, *, node: int, nodes: int, most: int) -> int:
    """Return the maximum flow from the root to ``node``, cut at ``most``."""
    # The source of its own keeps the total in range however much supply there is.
    tail = np.concatenate((arcs.tail, [nodes]))
    head = np.concatenate((arcs.head, [ROOT]))
    flow, _ = maximum_flow(
        tail,
        head,
        np.concatenate((room, [most])),
        source=nodes,
        sink=node,
        nodes=nodes + 1,
    )
    return int(flow[-1])
