"""On which days lanes can leave and arrive: the movements of a network, as planning takes them.

A day is a date as people at the site call it, counted as ``datetime.date.toordinal``. A *movement*
is a lane on one day of departure (DEVELOPERS.md, section 6). A network that says nothing of dates
has one movement a lane, all on the date of the cut-off.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from datetime import date
from functools import cached_property
from typing import Any, Final

import numpy as np

from service.network.columns import BoolArray, IntArray, Network, Texts
from service.network.moments import read_instant
from service.network.storage import storing_sites

# A year and a day: what travels longer is more likely a slip.
TRANSIT_DAYS_MAX: Final = 366
# What leaves later could arrive where the calendar has no days left.
LAST_YEAR: Final = "2200"


def is_dated(network: Network) -> bool:
    """Return whether a network says anything of dates, so that its plan shows them."""
    lanes, demand = network.lanes, network.demand
    return bool(
        "periods" in network.head
        or network.supply.available_from.values
        or any(column.values for column in (demand.earliest, demand.due, demand.latest))
        or any(column.values for column in (lanes.closes, lanes.departs, lanes.arrives))
        or lanes.transit_days.present.any()
    )


def day_number(text: str) -> int:
    """Return the day that a date, or the local date of an instant, is."""
    return date.fromisoformat(text[:10]).toordinal()


def day_text(day: int) -> str:
    """Return the date of a day."""
    return date.fromordinal(day).isoformat()


def days_of(column: Texts, *, absent: int) -> IntArray:
    """Return the day of each row of dates or instants, ``absent`` where nothing was given."""
    known = np.array([*(day_number(text) for text in column.values), absent], dtype=np.int64)
    found: IntArray = known[column.codes]
    return found


def moments_of(column: Texts, *, absent: int) -> IntArray:
    """Return the nanoseconds since 1970 of each row of instants."""
    known = [*(read_instant(text).nanoseconds for text in column.values), absent]
    found: IntArray = np.array(known, dtype=np.int64)[column.codes]
    return found


def cut_off_day(head: Mapping[str, Any]) -> int:
    """Return the local date of the cut-off."""
    return day_number(str(head["cut_off"]))


def first_day(head: Mapping[str, Any]) -> int:
    """Return the first day on which anything can be served from stock.

    That is the cut-off's, or that of ``planned_at`` where this is earlier.
    """
    return min(cut_off_day(head), day_number(str(head.get("planned_at", head["cut_off"]))))


def leaving_days(head: Mapping[str, Any]) -> tuple[int, ...]:
    """Return the days on which goods may leave on lanes without a departure, ascending.

    They are the periods from the cut-off's date on; without periods that date alone.
    """
    first = cut_off_day(head)
    if "periods" not in head:
        return (first,)
    return tuple(day for day in map(day_number, head["periods"]) if day >= first)


def gone_lanes(network: Network) -> BoolArray:
    """Return, in shape (lanes,), which departures closed before the plan is made.

    The plan is made at ``planned_at``, or else at the cut-off; a departure that names no time of
    closing closes when it departs.
    """
    lanes = network.lanes
    if not lanes.departs.values:
        return np.zeros(len(lanes), dtype=np.bool_)
    made = read_instant(str(network.head.get("planned_at", network.head["cut_off"]))).nanoseconds
    departs, closes = (moments_of(column, absent=0) for column in (lanes.departs, lanes.closes))
    early = np.where(lanes.closes.codes >= 0, closes, departs) < made
    gone: BoolArray = early & (lanes.departs.codes >= 0)
    return gone


@dataclass(frozen=True)
class Movements:
    """Lanes on days of departure, in shape (movements,), sorted by the lane's row and the day.

    ``row`` are rows of the network's lanes; ``departs`` and ``arrives`` are days at the lane's
    origin and destination.
    """

    row: IntArray
    departs: IntArray
    arrives: IntArray
    lanes: int

    @cached_property
    def first(self) -> IntArray:
        """Where the movements of each lane begin, and at last where they end."""
        return np.searchsorted(self.row, np.arange(self.lanes + 1))

    def of_lanes(self, rows: IntArray) -> IntArray:
        """Return the positions of the movements of the lanes at ``rows``, which ascend."""
        if not self.unlike:
            return rows
        counts = self.first[rows + 1] - self.first[rows]
        shift = np.repeat(self.first[rows] - (np.cumsum(counts) - counts), counts)
        found: IntArray = shift + np.arange(int(counts.sum()))
        return found

    @cached_property
    def unlike(self) -> bool:
        """Whether movements are other than one for each lane."""
        return not np.array_equal(self.row, np.arange(self.lanes))

    @property
    def not_one(self) -> BoolArray:
        """Which lanes can leave on more than one day, or on none, in shape (lanes,)."""
        other: BoolArray = np.diff(self.first) != 1
        return other


def movements_of(network: Network) -> Movements:
    """Return all movements of a network.

    A lane with ``departs`` leaves on that day. Another lane leaves a site on the leaving days,
    and a cross-dock on the days on which goods arrive there (of the leaving days, if there are
    periods); a cross-dock with stock, or at which nothing arrives, on the leaving days as well, and
    so does one with storage where there are periods.
    """
    lanes = network.lanes
    count = len(lanes)
    fixed = lanes.departs.codes >= 0
    leaving = leaving_days(network.head)
    departs = days_of(lanes.departs, absent=leaving[0] if leaving else cut_off_day(network.head))
    docks = _docks(network, departs, leaving)
    if not docks and len(leaving) == 1:
        rows = np.arange(count, dtype=np.int64)
        return _with_arrivals(network, rows, departs)
    # Days by site: a list for every cross-dock of its own, one for all other sites.
    lists = [leaving, *docks.values()]
    of_site = np.zeros(len(network.sites), dtype=np.int64)
    of_site[list(docks)] = np.arange(1, len(lists))
    sizes = np.array([len(days) for days in lists], dtype=np.int64)
    starts = np.cumsum(sizes) - sizes
    flat = np.array([day for days in lists for day in days], dtype=np.int64)
    own = of_site[lanes.origin]
    counts = np.where(fixed, 1, sizes[own])
    rows = np.repeat(np.arange(count, dtype=np.int64), counts)
    within = np.arange(len(rows)) - np.repeat(np.cumsum(counts) - counts, counts)
    listed = np.where(fixed[rows], 0, starts[own[rows]] + within)
    when = np.where(fixed[rows], departs[rows], flat[listed] if len(flat) else departs[rows])
    return _with_arrivals(network, rows, when)


def _with_arrivals(network: Network, rows: IntArray, departs: IntArray) -> Movements:
    """Return movements with the day on which each arrives."""
    lanes = network.lanes
    arrives = departs + lanes.transit_days.values[rows]
    if lanes.arrives.values:
        stated = days_of(lanes.arrives, absent=0)[rows]
        arrives = np.where(lanes.arrives.codes[rows] >= 0, stated, arrives)
    return Movements(row=rows, departs=departs, arrives=arrives, lanes=len(lanes))


def _holding(network: Network) -> BoolArray:
    """Return, in shape (sites,), where goods may wait for a leaving day."""
    holding = np.zeros(len(network.sites), dtype=np.bool_)
    holding[network.supply.site[network.supply.quantity.values > 0]] = True
    if "periods" in network.head:
        # What stays overnight leaves on the next of them.
        holding |= storing_sites(network, None)
    return holding


def _docks(
    network: Network, departs: IntArray, leaving: tuple[int, ...]
) -> dict[int, tuple[int, ...]]:
    """Return the days on which lanes without a departure leave each cross-dock.

    Those that leave on the leaving days alone are left out. Arrivals are followed as many times
    as there are cross-docks: no way needs to pass one twice.
    """
    lanes = network.lanes
    passes = np.array(["cross_dock" in site.roles for site in network.sites], dtype=np.bool_)
    inner = np.flatnonzero(passes[lanes.destination])
    if not len(inner):
        return {}
    stocked = _holding(network)
    fixed = lanes.departs.codes[inner] >= 0
    origin, destination = lanes.origin[inner], lanes.destination[inner]
    transit = lanes.transit_days.values[inner]
    found: dict[int, set[int]] = {int(site): set() for site in np.flatnonzero(passes)}
    arrives = days_of(lanes.arrives, absent=-1)[inner]
    arrives = np.where(arrives < 0, departs[inner] + transit, arrives)
    for site, day in set(zip(destination[fixed].tolist(), arrives[fixed].tolist(), strict=True)):
        found[site].add(day)
    first = ~fixed & (~passes[origin] | stocked[origin])
    for site, days in set(zip(destination[first].tolist(), transit[first].tolist(), strict=True)):
        found[site].update(day + days for day in leaving)
    between = ~fixed & passes[origin]
    ways = set(
        zip(
            origin[between].tolist(),
            destination[between].tolist(),
            transit[between].tolist(),
            strict=True,
        )
    )
    allowed = set(leaving) if "periods" in network.head else None
    for _ in found:
        before = {site: frozenset(days) for site, days in found.items()}
        for start, end, days in ways:
            open_days = before[start] if allowed is None else before[start] & allowed
            found[end].update(day + days for day in open_days)
        if all(len(before[site]) == len(days) for site, days in found.items()):
            break
    docks = {}
    for site, days in found.items():
        leaves: set[int] = days if allowed is None else days & allowed
        if stocked[site] or not days:
            leaves = leaves | set(leaving)
        if leaves != set(leaving):
            docks[site] = tuple(sorted(leaves))
    return docks
