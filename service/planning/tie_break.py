"""What arcs are called when ties are broken, (kind, id), and what they weigh for it."""

import hashlib
from dataclasses import dataclass

import numpy as np

from service.network.columns import IntArray, Network
from service.network.naming import encoded, lane_names
from service.planning.arcs import SIDES, Kind, Side
from service.planning.item_network import ItemNetwork

_RECEIVED = SIDES.index(Side.RECEIVED)


def tie_weight(kind: str, name: str) -> int:
    """Return 1 + the first 20 bits of SHA-256(kind, NUL, name): what one step costs in a tie."""
    digest = hashlib.sha256(kind.encode() + b"\0" + name.encode()).digest()
    return 1 + (int.from_bytes(digest[:3], "big") >> 4)


@dataclass(frozen=True, slots=True, kw_only=True)
class ItemTieBreak:
    """Names the arcs of one item that a planner could tell apart; all others weigh nothing."""

    network: Network
    own: ItemNetwork

    def __call__(self, positions: IntArray) -> tuple[IntArray, IntArray]:
        """Return tie weights and ranks in the order (kind, id) of the arcs at ``positions``."""
        named = self._names(positions)
        weight = np.array([tie_weight(*name) if name else 0 for name in named], np.int64)
        order = sorted(
            range(len(named)),
            key=lambda at: (
                named[at] is None,
                [part.encode() for part in named[at] or ()],
                int(positions[at]),
            ),
        )
        rank = np.empty(len(named), np.int64)
        rank[order] = np.arange(len(named))
        return weight, rank

    def _names(self, positions: IntArray) -> list[tuple[str, str] | None]:
        """Return (kind, id) of each arc, None for one that follows from others."""
        own = self.own
        kinds, subjects = own.kind[positions], own.subject[positions]
        names: list[tuple[str, str] | None] = [None] * positions.shape[0]
        lanes = np.flatnonzero(kinds == Kind.LANE)
        rows = own.lanes.rows[subjects[lanes]]
        for at, name in zip(lanes.tolist(), lane_names(self.network, rows), strict=True):
            names[at] = ("lane", name)
        for at in np.flatnonzero(kinds != Kind.LANE).tolist():
            names[at] = self._name(Kind(int(kinds[at])), int(subjects[at]), int(positions[at]))
        return names

    def _name(self, kind: Kind, subject: int, position: int) -> tuple[str, str] | None:
        """Return (kind, id) of an arc that is no lane."""
        own = self.own
        if kind == Kind.SUPPLY:
            return "supply", f"{self._site(own.stock.site[subject])}#{own.stock.number[subject]}"
        if kind == Kind.SHORT:
            return "short", self._group(subject)
        if kind == Kind.KEEP_SHORT:
            return "short", f"{self._site(own.stock.kept_site[subject])}#keep"
        if kind in (Kind.SERVE, Kind.SERVE_ARRIVED):
            site = own.groups.site[subject]
            if not own.layout.apart[site]:
                return None  # Follows from what is short.
            return "serve", f"{self._group(subject)}#{self._origin(position, int(site))}"
        return None

    def _origin(self, position: int, site: int) -> str:
        """Return whose goods a serving arc brings: the site's own, or those of an origin."""
        tail = int(self.own.arcs.tail[position])
        nodes = self.own.layout.nodes
        if nodes.side[tail] != _RECEIVED:
            return self._site(site)
        return self._site(nodes.qualifier[tail]) if nodes.qualifier[tail] >= 0 else ""

    def _group(self, group: int) -> str:
        """Return the id of a group: its site and its label."""
        label = self.network.demand.reference[self.own.groups.label[group]].decode()
        return f"{self._site(self.own.groups.site[group])}#{encoded(label)}"

    def _site(self, place: int) -> str:
        """Return a site's id as it stands in a name."""
        return encoded(self.network.sites[place].id)
