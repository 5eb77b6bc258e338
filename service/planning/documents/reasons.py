"""Why an order line is short: the one reason that a planner can act on, and who went first.

The reasons in the order in which they are tried for a demand group (or kept stock) that is short:

``no_lane``      no way leads from any stock to it, capacities ignored and closures open.
``too_late``     ways lead to it, but on none of them goods arrive within its dates.
``closed``       ways lead to it, but only through closures or departures that closed.
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

from enum import StrEnum
from functools import cached_property

import numpy as np

from service.network.columns import BoolArray, IntArray
from service.planning.documents.bottlenecks import AFTER_ALL_PRIORITIES, Bottlenecks
from service.planning.documents.ways import Ways
from service.planning.flow.forced_flow import reachable_back
from service.planning.model.arcs import ROOT, UNLIMITED, Kind, total
from service.planning.solve import ItemFlow


class Reason(StrEnum):
    """Why something is short."""

    NO_LANE = "no_lane"
    CLOSED = "closed"
    TOO_LATE = "too_late"
    NO_STOCK = "no_stock"
    LANE_FULL = "lane_full"
    SITE_FULL = "site_full"
    RULE = "rule"
    OUTRANKED = "outranked"
    NOT_WORTH_IT = "not_worth_it"


RELIEFS = (Reason.NO_STOCK, Reason.LANE_FULL, Reason.SITE_FULL, Reason.RULE)


class Reasons:
    """Answers for one solved item; what all its groups share is found once."""

    def __init__(self, solved: ItemFlow) -> None:
        """Prepare for the plan of one item."""
        self._solved = solved
        self._own = solved.own
        self._arcs = solved.own.arcs
        self._lanes = slice(0, solved.own.lanes.rows.shape[0])
        # Minimums on lanes hold also where other demand does not count.
        self._forced = bool((self._arcs.minimum[self._lanes] > 0).any())
        self._ways: dict[Reason | None, Ways] = {}
        self.bottlenecks = Bottlenecks(solved)

    def reason(self, short_arc: int) -> Reason:
        """Return why there is flow on the shortage arc at ``short_arc``."""
        node = int(self._arcs.head[short_arc])
        if not bool(self._own.stock.steps.any()):
            return Reason.NO_STOCK
        if not self._reached_open[node]:
            return Reason.TOO_LATE if self._in_time_some_day(short_arc) else Reason.NO_LANE
        if not self._reached[node]:
            return Reason.CLOSED
        want = int(self._arcs.minimum[self.bottlenecks.want_of[node]])
        alone = self._alone(short_arc, None, want=want)
        if alone >= want:
            return Reason.NOT_WORTH_IT if self._could_be_paid_for(short_arc) else Reason.OUTRANKED
        more: Reason | None = None
        for relief in RELIEFS:
            lifted = self._alone(short_arc, relief, want=want)
            if lifted >= want:
                return relief
            if lifted > alone and more is None:
                more = relief
        return more or Reason.NO_STOCK

    def _in_time_some_day(self, short_arc: int) -> bool:
        """Return whether stock could come to a demand if dates did not matter."""
        own, layout = self._own, self._own.layout
        if layout.places.day is None or own.kind[short_arc] != Kind.SHORT:
            return False
        group = int(own.subject[short_arc])
        allowed = own.groups.origins[group]
        sites = layout.passes_on.shape[0]
        stocked = np.zeros(sites, np.bool_)
        stocked[own.stock.site[own.stock.steps > 0]] = True
        if allowed is not None:
            stocked &= np.isin(np.arange(sites), list(allowed))
        origin = layout.nodes.site[self._arcs.tail[self._lanes]]
        destination = layout.nodes.site[self._arcs.head[self._lanes]]
        reached = stocked.copy()
        while True:
            # What arrives leaves again only at a cross-dock.
            sending = stocked | (reached & layout.passes_on)
            fresh = destination[sending[origin] & ~reached[destination]]
            if fresh.shape[0] == 0:
                return bool(reached[own.groups.site[group]])
            reached[fresh] = True

    def _could_be_paid_for(self, short_arc: int) -> bool:
        """Return whether a line that competes in money could have more, only not at its worth.

        So it is where something is left over in its bottleneck, or went to another line in money.
        """
        rank = self.bottlenecks.rank(short_arc)
        if rank[0] != AFTER_ALL_PRIORITIES:
            return False
        place = self.bottlenecks.place_of(short_arc)
        return self.bottlenecks.has_more(place) or any(
            own[0] == rank[0] and own > rank and component in place
            for _, own, component in self.bottlenecks.served_shorts
        )

    def _alone(self, short_arc: int, relief: Reason | None, *, want: int) -> int:
        """Return how much of ``want`` can be served if no other demand counts.

        With minimums one starts from the plan, in which all other demand may give way; without
        them from nothing at all, which needs only the few arcs before the demand.
        """
        served = want - int(self._solved.flow[short_arc]) if self._forced else 0
        node = int(self._solved.contraction.place[self._arcs.head[short_arc]])
        found = self._ways_with(relief).most(node, enough=want - served)
        return served + found

    def _ways_with(self, relief: Reason | None) -> Ways:
        """Return the ways to demand with one kind of limit lifted (None: as it is)."""
        if relief not in self._ways:
            whole = self._solved.contraction
            minimum, capacity = (bounds[whole.kept] for bounds in self._bounds(relief))
            tail = whole.place[self._arcs.tail[whole.kept]]
            head = whole.place[self._arcs.head[whole.kept]]
            shortage = np.zeros(len(self._arcs), np.bool_)
            shortage[self.bottlenecks.shorts] = True
            shortage = shortage[whole.kept]
            if self._forced:
                shortage = np.concatenate((shortage, np.zeros_like(shortage)))
                flow = self._solved.flow[whole.kept]
                tail, head = np.concatenate((tail, head)), np.concatenate((head, tail))
                room = np.concatenate(
                    (np.where(capacity == UNLIMITED, self._most, capacity - flow), flow - minimum)
                )
            else:
                room = np.where(capacity == UNLIMITED, self._most, capacity)
                room = np.where(self._goods[whole.kept], room, 0)
            self._ways[relief] = Ways(tail, head, room, nodes=whole.nodes, shortage=shortage)
        return self._ways[relief]

    def _bounds(self, relief: Reason | None) -> tuple[IntArray, IntArray]:
        """Return minimums and capacities with one kind of limit lifted; closures always stay."""
        own, lanes = self._own, self._lanes
        minimum, capacity = self._arcs.minimum.copy(), self._arcs.capacity.copy()
        if relief == Reason.NO_STOCK:
            capacity[own.of_kind(Kind.SUPPLY)] = UNLIMITED
        elif relief == Reason.LANE_FULL:
            capacity[lanes] = np.where(own.lanes.fixed, capacity[lanes], UNLIMITED)
        elif relief == Reason.SITE_FULL:
            capacity[own.of_kind(Kind.THROUGH, Kind.ARRIVE, Kind.LEAVE)] = UNLIMITED
        elif relief == Reason.RULE:
            minimum[lanes] = 0
            capacity[lanes] = np.where(own.lanes.fixed, own.lanes.stated_capacity, capacity[lanes])
        shut = self._closures
        return np.where(shut, 0, minimum), np.where(shut, 0, capacity)

    @cached_property
    def _most(self) -> int:
        """More than any demand wants."""
        return total(self._arcs.minimum) + 1

    @cached_property
    def _goods(self) -> BoolArray:
        """Which arcs carry goods from stock to demand: all but wants and shortages."""
        carrying = np.ones(len(self._arcs), np.bool_)
        carrying[self._own.of_kind(Kind.WANT, Kind.KEEP_WANT)] = False
        carrying[self.bottlenecks.shorts] = False
        return carrying

    @cached_property
    def _closures(self) -> BoolArray:
        """Which arcs a closure closes."""
        own = self._own
        shut = np.zeros(len(self._arcs), np.bool_)
        shut[self._lanes] = own.lanes.closed
        at_site = own.of_kind(Kind.THROUGH, Kind.PASS)
        site_of = own.layout.places.site
        shut[at_site] = own.layout.closed[site_of[own.subject[at_site]]]
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
