"""The days of each site, as one item sees them, put together where nothing tells them apart."""

from collections import defaultdict
from collections.abc import Mapping

import numpy as np

from service.network.columns import BoolArray, IntArray
from service.proof.calendar import Calendar
from service.proof.groups import Wanted
from service.proof.rulings import Rulings
from service.proof.stock import Stock
from service.proof.usable import cross_docks

# Above every day that a calendar has.
DAYS = 2**22


class SiteDays:
    """The days of each site, put together where nothing tells them apart."""

    def __init__(  # noqa: PLR0913, PLR0917 - whatever can tell days apart
        self,
        calendar: Calendar,
        rulings: Rulings,
        item: int,
        rows: IntArray,
        stock: Mapping[int, Stock],
        wanted: Wanted,
    ) -> None:
        """Gather the days of every site, and the place of each."""
        assert calendar.departs is not None  # noqa: S101 - only dated networks come here
        assert calendar.arrives is not None  # noqa: S101 - only dated networks come here
        lanes = calendar.network.lanes
        self.leaving = lanes.origin[rows].astype(np.int64) * DAYS + calendar.departs[rows]
        self.coming = lanes.destination[rows].astype(np.int64) * DAYS + calendar.arrives[rows]
        self._came_from = lanes.origin[rows]
        windows: dict[int, set[tuple[int, int | None, int | None]]] = defaultdict(set)
        for group in wanted.groups:
            windows[group.site].add((group.earliest or 0, group.due, group.latest))
        days: dict[int, set[int]] = defaultdict(set)
        for key in {*self.leaving.tolist(), *self.coming.tolist()}:
            days[key // DAYS].add(key % DAYS)
        for site in {*stock, *windows}:
            for day in stock[site].tier_from if site in stock else ():
                for earliest, _, _ in windows.get(site, ()):
                    days[site].add(max(calendar.today, day, earliest))
            if not days[site]:
                days[site].add(calendar.today)
        self._of: dict[int, int] = {}
        self.days: dict[int, list[int]] = {}
        apart = _apart(calendar, rulings, item)
        for site, own in days.items():
            from_days = stock[site].tier_from if site in stock else ()
            first: dict[object, int] = {}
            for day in sorted(own):
                look: object = day
                if not apart[site]:
                    look = (
                        sum(day >= start for start in set(from_days)),
                        tuple(lateness(day, window) for window in windows.get(site, ())),
                    )
                self._of[site * DAYS + day] = first.setdefault(look, day)
            self.days[site] = sorted(set(first.values()))

    def of(self, keys: IntArray) -> IntArray:
        """Return the day that names the place of each (site, day), as (site, day)."""
        distinct, position = np.unique(keys, return_inverse=True)
        named = [key // DAYS * DAYS + self._of[key] for key in distinct.tolist()]
        found: IntArray = np.array(named, dtype=np.int64)[position]
        return found

    def origins(self, site: int) -> Mapping[int, set[int]]:
        """Return, by place of a site, the sites from which movements arrive there."""
        found: dict[int, set[int]] = defaultdict(set)
        here = np.flatnonzero(self.coming // DAYS == site)
        for key, origin in set(
            zip(self.coming[here].tolist(), self._came_from[here].tolist(), strict=True)
        ):
            found[self._of[key]].add(origin)
        return found


def _apart(calendar: Calendar, rulings: Rulings, item: int) -> BoolArray:
    """Return the sites of which every day is a place: cross-docks, and those with a limit."""
    apart = cross_docks(calendar.network)
    for ruling in rulings.throughputs(item):
        apart |= ruling.sites
    return apart


def lateness(day: int, window: tuple[int, int | None, int | None]) -> int | None:
    """Return how late goods are on a day to who wants them in a window, None if they may not be."""
    earliest, due, latest = window
    if day < earliest or (latest is not None and day > latest):
        return None
    return 0 if due is None else max(0, day - due)
