"""Who went first: the demand that shares a bottleneck with what is short."""

from functools import cached_property

import numpy as np
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

from service.network.columns import IntArray
from service.planning.documents.ways import Ways
from service.planning.model.arcs import ROOT, Kind
from service.planning.model.groups import IN_MONEY
from service.planning.solve import ItemFlow

AFTER_ALL_PRIORITIES = 10


class Bottlenecks:
    """The bottlenecks of one solved item.

    The bottleneck of a short demand is the set X of all nodes that still have a residual way to
    it, shortage left out: all its supply is used, and nothing that could enter it is left over, so
    that what X lacks went to demand in X. Strongly connected places share it; their residual
    network is searched as one of components.
    """

    def __init__(self, solved: ItemFlow) -> None:
        """Prepare for the plan of one item."""
        self._solved = solved
        self._own = solved.own
        arcs, flow = solved.own.arcs, solved.flow
        shorts = self.shorts
        more, less = arcs.can_take_more(flow), arcs.can_give_up(flow)
        more[shorts] = False
        less[shorts] = False
        self._tail = np.concatenate((arcs.tail[more], arcs.head[less]))
        self._head = np.concatenate((arcs.head[more], arcs.tail[less]))

    @cached_property
    def shorts(self) -> IntArray:
        """Positions of all shortage arcs."""
        return self._own.of_kind(Kind.SHORT, Kind.KEEP_SHORT)

    @cached_property
    def want_of(self) -> dict[int, int]:
        """The position of the arc that says what each demand node wants."""
        wants = self._own.of_kind(Kind.WANT, Kind.KEEP_WANT)
        return dict(zip(self._own.arcs.tail[wants].tolist(), wants.tolist(), strict=True))

    def rank(self, short_arc: int) -> tuple[int, int]:
        """Return what decides who goes first: priority, then (in money) the dearest shortage."""
        subject = int(self._own.subject[short_arc])
        if self._own.kind[short_arc] == Kind.KEEP_SHORT:
            return int(self._own.stock.kept_priority[subject]), 0
        priority = int(self._own.groups.priority[subject])
        if priority == IN_MONEY:
            return AFTER_ALL_PRIORITIES, -int(self._own.arcs.cost[short_arc])
        return priority, 0

    def place_of(self, short_arc: int) -> frozenset[int]:
        """Return the components of a short demand's bottleneck that hold served demand or the root.

        Two short demands with the same ones were outranked by the same lines.
        """
        component, ways = self._components
        inside = ways.before(int(component[self._own.arcs.head[short_arc]]))
        return frozenset(self._telling[inside[self._telling]].tolist())

    def has_more(self, place: frozenset[int]) -> bool:
        """Return whether something is left over in a bottleneck: the root can still send there."""
        return int(self._components[0][ROOT]) in place

    def went_first(self, place: frozenset[int], rank: tuple[int, int]) -> list[int]:
        """Return the shortage arcs of demand in a bottleneck that is served and ranks as high."""
        return [
            arc for arc, own, component in self.served_shorts if own <= rank and component in place
        ]

    @cached_property
    def served_shorts(self) -> list[tuple[int, tuple[int, int], int]]:
        """(shortage arc, rank, component) of every demand that is served in part or in full."""
        arcs, component = self._own.arcs, self._components[0]
        return [
            (arc, self.rank(arc), int(component[arcs.head[arc]]))
            for arc in self.shorts.tolist()
            if arcs.minimum[self.want_of[int(arcs.head[arc])]] > self._solved.flow[arc]
        ]

    @cached_property
    def _telling(self) -> IntArray:
        """The components that hold served demand or the root."""
        component = self._components[0]
        held = {own for _, _, own in self.served_shorts} | {int(component[ROOT])}
        return np.array(sorted(held), np.int64)

    @cached_property
    def _components(self) -> tuple[IntArray, Ways]:
        """The component of every node, and the ways between components."""
        nodes = self._own.node_count
        graph = coo_array(
            (np.ones(self._tail.shape[0], np.int8), (self._tail, self._head)), shape=(nodes, nodes)
        ).tocsr()
        count, found = connected_components(graph, directed=True, connection="strong")
        component: IntArray = found.astype(np.int64)
        tail, head = component[self._tail], component[self._head]
        across = tail != head
        pairs = np.sort(tail[across] * count + head[across])
        pairs = pairs[np.append(True, pairs[1:] != pairs[:-1])[: pairs.shape[0]]]
        return component, Ways(
            pairs // count, pairs % count, np.ones(pairs.shape[0], np.int64), nodes=int(count)
        )
