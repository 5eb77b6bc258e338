"""The places of one item: its sites, or where dates matter its sites on their days.

Days of a site that nothing tells apart are one place (DEVELOPERS.md, section 6), so that an item
without dates has one place a site.
"""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from service.network.columns import BoolArray, CodeArray, IntArray
from service.network.days import day_text
from service.planning.model.bounds import LaneBounds
from service.planning.model.groups import Groups
from service.planning.model.stock import Stock

# Above every day that a calendar has (9999-12-31 is day 3,652,059).
_DAYS = 2**22


@dataclass(frozen=True, slots=True, kw_only=True)
class SiteDays:
    """Places as columns of shape (places,), sorted by site and day.

    ``day`` is None where the network says nothing of dates: then every site is one place, at its
    own position. ``first`` (shape (sites + 1,)) tells where the places of each site begin.
    ``tail`` and ``head`` are the places at the ends of the item's lanes.
    """

    site: CodeArray
    day: IntArray | None
    first: IntArray
    tail: IntArray | CodeArray
    head: IntArray | CodeArray

    def of_site(self, site: int) -> range:
        """Return the places of a site, in the order of their days."""
        return range(int(self.first[site]), int(self.first[site + 1]))

    def counts(self) -> IntArray:
        """Return how many places each site has."""
        return np.diff(self.first)

    def day_of(self, place: int) -> int:
        """Return the day of a place; 0 where there are no dates."""
        return 0 if self.day is None else int(self.day[place])

    def date_of(self, place: int) -> str | None:
        """Return the date of a place, None where there are no dates."""
        return None if self.day is None else day_text(int(self.day[place]))


def each_place(days: SiteDays, sites: CodeArray) -> tuple[IntArray, IntArray]:
    """Return each of ``sites`` (by its position there) with each place of it."""
    counts = days.counts()[sites]
    which = np.repeat(np.arange(sites.shape[0]), counts)
    within = np.arange(which.shape[0]) - np.repeat(np.cumsum(counts) - counts, counts)
    return which, days.first[sites][which] + within


def undated_places(sites: int, origin: CodeArray, destination: CodeArray) -> SiteDays:
    """Return the places of an item in a network without dates."""
    return SiteDays(
        site=np.arange(sites, dtype=np.int32),
        day=None,
        first=np.arange(sites + 1),
        tail=origin,
        head=destination,
    )


def dated_places(  # noqa: PLR0913 - what can tell days apart comes from everywhere
    ends: tuple[CodeArray, CodeArray],
    lanes: LaneBounds,
    stock: Stock,
    groups: Groups,
    *,
    apart_by_day: BoolArray,
    today: int,
) -> SiteDays:
    """Return the places of an item whose network has dates.

    ``ends`` are the sites at which its lanes begin and end; ``apart_by_day`` (shape (sites,)) are
    those of which every day is a place of its own.
    """
    assert lanes.departs is not None  # noqa: S101 - a dated network
    assert lanes.arrives is not None  # noqa: S101 - a dated network
    sites = apart_by_day.shape[0]
    leaving = ends[0].astype(np.int64) * _DAYS + lanes.departs
    coming = ends[1].astype(np.int64) * _DAYS + lanes.arrives
    own = list(_own_demand(stock, groups, today))
    keys = _distinct(np.concatenate((leaving, coming, np.array(own, np.int64))))
    known = np.zeros(sites, np.bool_)
    known[keys // _DAYS] = True
    lone = [site for site in {*stock.site.tolist(), *groups.site.tolist()} if not known[site]]
    keys = np.sort(np.append(keys, np.array(lone, np.int64) * _DAYS + today))
    label = _labels(keys, stock, groups, apart_by_day)
    named = _distinct(label)
    place = np.searchsorted(named, label)
    site = named // _DAYS
    return SiteDays(
        site=site.astype(np.int32),
        day=named % _DAYS,
        first=np.searchsorted(site, np.arange(sites + 1)),
        tail=place[np.searchsorted(keys, leaving)],
        head=place[np.searchsorted(keys, coming)],
    )


def _own_demand(stock: Stock, groups: Groups, today: int) -> Iterator[int]:
    """Yield the days on which stock of a site can serve who wants it right there."""
    from_days: dict[int, set[int]] = {}
    for site, day in zip(stock.site.tolist(), stock.from_day.tolist(), strict=True):
        from_days.setdefault(site, set()).add(max(day, today))
    for site, earliest in zip(groups.site.tolist(), groups.earliest.tolist(), strict=True):
        for day in from_days.get(site, ()):
            yield site * _DAYS + max(day, earliest)


def _labels(keys: IntArray, stock: Stock, groups: Groups, apart_by_day: BoolArray) -> IntArray:
    """Return, for each site and day, the first day of the site that nothing tells from it."""
    label = keys.copy()
    site = keys // _DAYS
    starts = np.flatnonzero(np.append(True, site[1:] != site[:-1])[: site.shape[0]])
    stops = np.append(starts[1:], site.shape[0])
    several = (stops - starts > 1) & ~apart_by_day[site[starts]]
    if not several.any():
        return label
    available: dict[int, set[int]] = {}
    for at, day in zip(stock.site.tolist(), stock.from_day.tolist(), strict=True):
        available.setdefault(at, set()).add(day)
    windows: dict[int, set[tuple[int, int, int]]] = {}
    for at, *dates in zip(
        groups.site.tolist(),
        groups.earliest.tolist(),
        groups.due.tolist(),
        groups.latest.tolist(),
        strict=True,
    ):
        windows.setdefault(at, set()).add((dates[0], dates[1], dates[2]))
    for start, stop in zip(starts[several].tolist(), stops[several].tolist(), strict=True):
        at = int(site[start])
        seen: dict[tuple[object, ...], int] = {}
        for position in range(start, stop):
            day = int(keys[position]) % _DAYS
            profile = (
                *(from_day <= day for from_day in available.get(at, ())),
                *(
                    max(0, day - due) if earliest <= day <= latest else None
                    for earliest, due, latest in windows.get(at, ())
                ),
            )
            label[position] = seen.setdefault(profile, int(keys[position]))
    return label


def _distinct(keys: IntArray) -> IntArray:
    """Return distinct keys, ascending; sorted, where ``numpy.unique`` would hash."""
    keys = np.sort(keys)
    found: IntArray = keys[np.append(True, keys[1:] != keys[:-1])[: keys.shape[0]]]
    return found
