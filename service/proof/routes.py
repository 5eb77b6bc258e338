"""The ways of goods to order lines: lane by lane, through cross-docks, and day by day."""

import itertools
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from service.proof.calendar import Calendar, date_of, day_of, storing
from service.proof.flows import PlanLine
from service.proof.groups import OrderLine
from service.proof.results import ItemResult, lane_ends
from service.proof.usable import cross_docks


class Routes:
    """Follows sources over lanes."""

    def __init__(self, calendar: Calendar, lines: Sequence[PlanLine]) -> None:
        """Look up the lanes of all plan lines."""
        network, self._calendar = calendar.network, calendar
        self._rows = {
            (line.document["lane"], line.document.get("departs")): line.row
            for line in lines
            if line.row >= 0
        }
        self._ends = lane_ends(network, np.array(sorted(set(self._rows.values())), dtype=np.int64))
        self._passing = cross_docks(network).tolist()
        self._items = [item.id for item in network.items]
        self._sites = {site.id: place for place, site in enumerate(network.sites)}

    def route(
        self, result: ItemResult, line: OrderLine, source: Mapping[str, Any]
    ) -> tuple[int, list[int] | None]:
        """Return a source's origin and the lanes from there to the site of its line.

        None if there is no way. Only lanes that carry something of the item count, and only
        cross-docks pass goods on.
        """
        origin = self._sites.get(source["origin"], -1)
        if origin < 0 or source["item"] != self._items[result.item]:
            return origin, None
        if line.origins is not None and origin not in line.origins:
            return origin, None
        rows = [self._rows.get((leg["lane"], leg.get("departs")), -1) for leg in source["legs"]]
        here = origin
        for position, row in enumerate(rows):
            if row not in result.on_lane:
                return origin, None
            start, end = self._ends[row]
            if start != here or (position and not self._passing[here]):
                return origin, None
            here = end
        if here != line.site or not follows_by_days(self._calendar, source, rows):
            return origin, None
        return origin, rows


def follows_by_days(calendar: Calendar, source: Mapping[str, Any], rows: Sequence[int]) -> bool:
    """Return whether the dates of a source are those of its movements ``rows``, one after another.

    Goods leave a cross-dock on the day on which they reach it, or later where they may stay
    overnight, and are there when they are drawn: some stock of that lot is available on the first
    day.
    """
    if not calendar.dated:
        shown = (
            "arrives" in source,
            *("departs" in leg or "arrives" in leg for leg in source["legs"]),
        )
        return not any(shown)
    for leg, row in zip(source["legs"], rows, strict=True):
        if not calendar.is_dated(leg, row):
            return False
    assert calendar.departs is not None  # noqa: S101 - a dated network
    assert calendar.arrives is not None  # noqa: S101 - a dated network
    for before, after in itertools.pairwise(rows):
        site = int(calendar.network.lanes.origin[after])
        if not _waits(calendar, source, site, calendar.arrives[before], calendar.departs[after]):
            return False
    arrives = source.get("arrives")
    if rows:
        site = int(calendar.network.lanes.destination[rows[-1]])
        last = calendar.arrives[rows[-1]]
        if not _waits(calendar, source, site, last, day_of(arrives or "")):
            return False
    first = date_of(int(calendar.departs[rows[0]])) if rows else arrives
    return first is not None and _is_there(calendar, source, first)


def _waits(
    calendar: Calendar, source: Mapping[str, Any], site: int, since: int, until: int
) -> bool:
    """Return whether goods of a source may be at a site from a day to another."""
    if since == until:
        return True
    return bool(since < until) and site in storing(calendar.network, source["item"])


def _is_there(calendar: Calendar, source: Mapping[str, Any], date: str) -> bool:
    """Return whether stock of a source's lot can be drawn at its origin on a date."""
    network = calendar.network
    supply = network.supply
    if not supply.available_from.values:
        return True
    return any(
        (supply.available_from.text(row) or "") <= date
        and supply.lot.text(row) == source["lot"]
        and network.sites[supply.site[row]].id == source["origin"]
        and network.items[supply.item[row]].id == source["item"]
        for row in range(len(supply))
    )
