"""What arcs are called when ties are broken, (kind, id), and what they weigh for it."""

import hashlib
from dataclasses import dataclass

import numpy as np

from service.network.columns import IntArray, Network
from service.network.days import day_text
from service.network.naming import encoded, lane_names
from service.planning.model.arcs import SIDES, Kind, Side
from service.planning.model.item_network import ItemNetwork

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
        at, names = self._names(positions)
        weight = np.zeros(positions.shape[0], np.int64)
        weight[at] = [tie_weight(*name) for name in names]
        keys = [tuple(part.encode() for part in name) for name in names]
        place = positions[at].tolist()
        first = at[sorted(range(len(names)), key=lambda one: (keys[one], place[one]))]
        # What has no name comes last, as it stands.
        nameless = np.ones(positions.shape[0], np.bool_)
        nameless[at] = False
        last = np.flatnonzero(nameless)
        last = last[np.argsort(positions[last], kind="stable")]
        rank = np.empty(positions.shape[0], np.int64)
        rank[np.concatenate((first, last))] = np.arange(positions.shape[0])
        return weight, rank

    def _names(self, positions: IntArray) -> tuple[IntArray, list[tuple[str, str]]]:
        """Return which of ``positions`` have a name, and (kind, id) of each; others follow."""
        own = self.own
        kinds, subjects = own.kind[positions], own.subject[positions]
        lanes = np.flatnonzero(kinds == Kind.LANE)
        names = [
            name + self._on_day(lane)
            for lane, name in zip(
                subjects[lanes].tolist(),
                lane_names(self.network, own.lanes.rows[subjects[lanes]]),
                strict=True,
            )
        ]
        said = np.isin(kinds, [Kind.SUPPLY, Kind.SHORT, Kind.KEEP_SHORT])
        serving = np.flatnonzero(np.isin(kinds, [Kind.SERVE, Kind.SERVE_ARRIVED]))
        # Elsewhere who serves a group follows from what is short, and when from who.
        several = own.layout.places.counts() > 1
        site = own.groups.site[subjects[serving]]
        said[serving] = own.layout.apart[site] | several[site]
        drawing = np.flatnonzero(kinds == Kind.DRAW)
        said[drawing] = several[own.stock.site[subjects[drawing]]]
        others = np.flatnonzero(said)
        return np.concatenate((lanes, others)), [
            *(("lane", name) for name in names),
            *(
                self._name(Kind(kind), subject, position)
                for kind, subject, position in zip(
                    kinds[others].tolist(),
                    subjects[others].tolist(),
                    positions[others].tolist(),
                    strict=True,
                )
            ),
        ]

    def _name(self, kind: Kind, subject: int, position: int) -> tuple[str, str]:
        """Return (kind, id) of an arc that is no lane."""
        own = self.own
        if kind == Kind.SUPPLY:
            return "supply", self._tier(subject)
        if kind == Kind.DRAW:
            return "draw", f"{self._tier(subject)}@{self._date(int(own.arcs.head[position]))}"
        if kind == Kind.SHORT:
            return "short", self._group(subject)
        if kind == Kind.KEEP_SHORT:
            return "short", f"{self._site(own.stock.kept_site[subject])}#keep"
        site = int(own.groups.site[subject])
        day = f"@{self._date(int(own.arcs.tail[position]))}" if self._has_days(site) else ""
        return "serve", f"{self._group(subject)}#{self._origin(position, site)}{day}"

    def _on_day(self, lane: int) -> str:
        """Return what tells a lane from itself on other days; nothing where there are none."""
        lanes = self.own.lanes
        near = [at for at in (lane - 1, lane + 1) if 0 <= at < lanes.rows.shape[0]]
        if lanes.departs is None or all(lanes.rows[at] != lanes.rows[lane] for at in near):
            return ""
        return f"@{day_text(int(lanes.departs[lane]))}"

    def _has_days(self, site: int) -> bool:
        """Return whether a site has several places."""
        return len(self.own.layout.places.of_site(site)) > 1

    def _date(self, node: int) -> str | None:
        """Return the date of a node that belongs to a place."""
        layout = self.own.layout
        return layout.places.date_of(int(layout.nodes.place[node]))

    def _origin(self, position: int, site: int) -> str:
        """Return whose goods a serving arc brings: the site's own, or those of an origin."""
        tail = int(self.own.arcs.tail[position])
        nodes = self.own.layout.nodes
        if nodes.side[tail] != _RECEIVED:
            return self._site(site)
        return self._site(nodes.qualifier[tail]) if nodes.qualifier[tail] >= 0 else ""

    def _tier(self, tier: int) -> str:
        """Return the id of a tier: its site and its number."""
        stock = self.own.stock
        return f"{self._site(stock.site[tier])}#{stock.number[tier]}"

    def _group(self, group: int) -> str:
        """Return the id of a group: its site and its label."""
        label = self.network.demand.reference[self.own.groups.label[group]].decode()
        return f"{self._site(self.own.groups.site[group])}#{encoded(label)}"

    def _site(self, place: int) -> str:
        """Return a site's id as it stands in a name."""
        return encoded(self.network.sites[place].id)
