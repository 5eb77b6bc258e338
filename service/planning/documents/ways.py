"""How much can come to one place: maximum flow over as little of a network as decides it."""

import numpy as np

from service.network.columns import BoolArray, IntArray
from service.planning.flow.forced_flow import maximum_flow
from service.planning.model.arcs import ROOT


class Ways:
    """Arcs with room, indexed by where they lead to."""

    def __init__(
        self,
        tail: IntArray,
        head: IntArray,
        room: IntArray,
        *,
        nodes: int,
        shortage: BoolArray | None = None,
    ) -> None:
        """Index arcs; those without room are left out. ``shortage`` marks arcs that bring none."""
        open_ = np.flatnonzero((room > 0) & (tail != head))
        order = open_[np.argsort(head[open_].astype(np.int32), kind="stable")]
        self._tail, self._head, self._room = tail[order], head[order], room[order]
        self._bounds = np.searchsorted(self._head, np.arange(nodes + 1))
        none = np.zeros(order.shape[0], np.bool_)
        self._shortage = none if shortage is None else shortage[order]
        self._from_root = np.flatnonzero(self._tail == ROOT)
        self._nodes = nodes

    def into(self, places: IntArray) -> IntArray:
        """Return the positions of all arcs that lead to ``places``."""
        first = self._bounds[places]
        counts = self._bounds[places + 1] - first
        shift = np.repeat(first - (np.cumsum(counts) - counts), counts)
        return shift + np.arange(int(counts.sum()))

    def sources(self, places: IntArray) -> IntArray:
        """Return the nodes with an arc to one of ``places``, repeats included."""
        return self._tail[self.into(places)]

    def before(self, node: int) -> BoolArray:
        """Return the nodes with a way to ``node``, itself included."""
        seen = np.zeros(self._nodes, np.bool_)
        seen[node] = True
        frontier = np.array([node])
        while frontier.shape[0]:
            tails = self._tail[self.into(frontier)]
            fresh = np.zeros(self._nodes, np.bool_)
            fresh[tails] = True
            frontier = np.flatnonzero(fresh & ~seen)
            seen[frontier] = True
        return seen

    def most(self, node: int, *, enough: int) -> int:
        """Return the maximum flow from the root to ``node``, cut at ``enough``.

        The network is looked at from ``node`` backwards, only as far as needed to bring ``enough``.
        The shortage of ``node`` itself does not count; that of others is what they give up.
        """
        seen = np.zeros(self._nodes, np.bool_)
        seen[[node, ROOT]] = True
        frontier = np.array([node])
        fresh = seen.copy()
        # Positions of the arcs looked at, without and with those from the root.
        inner: list[IntArray] = []
        outer: list[IntArray] = []
        while True:
            # What the root can send to the places reached last is tried before all that lies
            # before them is looked at: a place that a million arcs enter may not need them.
            supplied = self._from_root[fresh[self._head[self._from_root]]]
            if not inner:
                supplied = supplied[~self._shortage[supplied]]
            outer.append(supplied)
            if frontier.shape[0] == 0 or supplied.shape[0]:
                flow = self._flow(np.concatenate((*inner, *outer)), node, enough=enough)
                if flow == enough or frontier.shape[0] == 0:
                    return flow
            arcs = self.into(frontier)
            arcs = arcs[self._tail[arcs] != ROOT]
            inner.append(arcs)
            fresh = np.zeros(self._nodes, np.bool_)
            fresh[self._tail[arcs]] = True
            fresh &= ~seen
            frontier = np.flatnonzero(fresh)
            seen[frontier] = True

    def _flow(self, arcs: IntArray, node: int, *, enough: int) -> int:
        """Return the maximum flow from the root to ``node`` over ``arcs``, cut at ``enough``."""
        places, ends = np.unique(
            np.concatenate((self._tail[arcs], self._head[arcs], [ROOT, node])),
            return_inverse=True,
        )
        tail, head = ends[: arcs.shape[0]], ends[arcs.shape[0] : -2]
        source = places.shape[0]
        # A source of its own in front of the root keeps the total in range.
        flow, _ = maximum_flow(
            np.append(tail, source),
            np.append(head, ends[-2]),
            np.append(np.minimum(self._room[arcs], enough), enough),
            source=source,
            sink=int(ends[-1]),
            nodes=source + 1,
        )
        return int(flow[-1])
