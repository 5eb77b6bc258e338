"""On which days lanes leave and arrive, worked out from the columns by code of the proof alone.

A *movement* is a lane on one day of departure (DEVELOPERS.md, section 6). To the checks that follow
movements are the lanes of the network, so that each day is counted by itself.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import UTC, date, datetime
from typing import Any

import numpy as np

from service.network.columns import BoolArray, IntArray, Network, rows_at
from service.network.naming import lane_names, lane_rows


@dataclass(frozen=True, slots=True, kw_only=True)
class Calendar:
    """A network whose lanes are its movements, and what tells one from another.

    ``stated`` is the network as it was sent; ``lane`` (shape (movements,)) is the row that each
    movement has there, ascending. ``departs`` and ``arrives`` are days, None without dates.
    """

    stated: Network
    network: Network
    lane: IntArray
    departs: IntArray | None
    arrives: IntArray | None
    today: int

    @property
    def dated(self) -> bool:
        """Return whether the network says anything of dates."""
        return self.departs is not None

    def rows(self, names: Sequence[str], departs: Sequence[object]) -> list[int]:
        """Return the movements of lanes by name and date of departure, -1 for one not there.

        Without dates nothing may be said of them.
        """
        rows = lane_rows(self.stated, list(names))
        if self.departs is None:
            return [row if said is None else -1 for row, said in zip(rows, departs, strict=True)]
        known = {
            (lane, day): position
            for position, (lane, day) in enumerate(
                zip(self.lane.tolist(), self.departs.tolist(), strict=True)
            )
        }
        return [
            known.get((row, day_of(said) if isinstance(said, str) else 0), -1)
            for row, said in zip(rows, departs, strict=True)
        ]

    def names(self, rows: IntArray) -> list[str]:
        """Return the names of the lanes of some movements."""
        return lane_names(self.stated, self.lane[rows])

    def is_dated(self, line: Mapping[str, Any], row: int) -> bool:
        """Return whether a row of a document shows the dates of a movement, or needs none.

        Goods that are used where they are drawn (row -1) depart and arrive never.
        """
        if self.departs is None:
            return "departs" not in line and "arrives" not in line
        stated = {field: line[field] for field in ("departs", "arrives") if field in line}
        departs, arrives = (None, None) if row < 0 else self.dates(row)
        return stated == {"departs": departs, "arrives": arrives}

    def dates(self, row: int) -> tuple[str, str]:
        """Return the dates on which a movement departs and arrives; there must be some."""
        assert self.departs is not None  # noqa: S101 - only asked of dated networks
        assert self.arrives is not None  # noqa: S101 - only asked of dated networks
        return date_of(int(self.departs[row])), date_of(int(self.arrives[row]))


def on_day(side: str, date: str | None) -> str:
    """Return what a side of a site is called on a day; a side without days keeps its name."""
    return side if date is None else f"{side}@{date}"


def day_of(text: str) -> int:
    """Return the day of a date, or of the local date of an instant; 0 for anything else."""
    try:
        return date.fromisoformat(text[:10]).toordinal()
    except ValueError:
        return 0


def date_of(day: int) -> str:
    """Return the date of a day."""
    return date.fromordinal(day).isoformat()


def calendar_of(network: Network) -> Calendar:
    """Return the movements of a network."""
    today = day_of(str(network.head["cut_off"]))
    lanes, demand = network.lanes, network.demand
    texts = (
        lanes.departs,
        lanes.arrives,
        lanes.closes,
        demand.earliest,
        demand.due,
        demand.latest,
        network.supply.available_from,
    )
    if not (
        "periods" in network.head
        or any(column.values for column in texts)
        or lanes.transit_days.present.any()
    ):
        everyone = np.arange(len(lanes), dtype=np.int64)
        return Calendar(
            stated=network, network=network, lane=everyone, departs=None, arrives=None, today=today
        )
    lane, departs = _departures(network, today)
    arrives = departs + lanes.transit_days.values[lane]
    if lanes.arrives.values:
        named = np.array([*map(day_of, lanes.arrives.values), 0], dtype=np.int64)
        codes = lanes.arrives.codes[lane]
        arrives = np.where(codes >= 0, named[codes], arrives)
    same = np.array_equal(lane, np.arange(len(lanes)))
    return Calendar(
        stated=network,
        network=network if same else replace(network, lanes=rows_at(lanes, lane)),
        lane=lane,
        departs=departs,
        arrives=arrives,
        today=today,
    )


def _departures(network: Network, today: int) -> tuple[IntArray, IntArray]:
    """Return, for each movement, its lane and its day of departure, in that order."""
    lanes = network.lanes
    periods = _periods(network.head, today)
    plain = sorted(periods) if periods is not None else [today]
    days = _dock_days(network, plain, periods)
    named = [day_of(text) for text in lanes.departs.values]
    # Which sites leave on days of their own; all other lanes are looked at as columns.
    special = np.zeros(len(network.sites), dtype=np.bool_)
    special[list(days)] = True
    fixed = lanes.departs.codes >= 0
    one_by_one = np.flatnonzero(special[lanes.origin] & ~fixed)
    usual = np.flatnonzero(~special[lanes.origin] & ~fixed)
    stated = np.flatnonzero(fixed)
    parts = [(stated, np.array(named, dtype=np.int64)[lanes.departs.codes[stated]])]
    parts += [(usual, np.full(len(usual), day, dtype=np.int64)) for day in plain]
    pairs = [
        (row, day)
        for row, site in zip(one_by_one.tolist(), lanes.origin[one_by_one].tolist(), strict=True)
        for day in days[site]
    ]
    own = np.array(pairs, dtype=np.int64).reshape(len(pairs), 2)
    lane = np.concatenate([part[0] for part in parts] + [own[:, 0]])
    day = np.concatenate([part[1] for part in parts] + [own[:, 1]])
    order = np.lexsort((day, lane))
    return lane[order], day[order]


def _periods(head: Mapping[str, Any], today: int) -> set[int] | None:
    """Return the days on which goods may leave, None where the network does not say."""
    if "periods" not in head:
        return None
    return {day for day in map(day_of, head["periods"]) if day >= today}


def _dock_days(
    network: Network, plain: list[int], periods: set[int] | None
) -> dict[int, list[int]]:
    """Return the days on which lanes without a departure leave each cross-dock, ascending."""
    supply = network.supply
    docks = {place for place, site in enumerate(network.sites) if "cross_dock" in site.roles}
    if not docks:
        return {}
    stocked = set(supply.site[supply.quantity.values > 0].tolist())
    if periods is not None:
        # Goods that may stay overnight leave on the next of them.
        stocked |= storing(network, None)
    arrivals, onward = _first_arrivals(network, plain, docks, stocked)
    for _ in docks:
        fresh = [
            (dock, day + transit)
            for origin, dock, transit in onward
            for day in arrivals[origin]
            if (periods is None or day in periods) and day + transit not in arrivals[dock]
        ]
        if not fresh:
            break
        for dock, day in fresh:
            arrivals[dock].add(day)
    result = {}
    for dock, came in arrivals.items():
        leaves = {day for day in came if periods is None or day in periods}
        if dock in stocked or not came:
            leaves.update(plain)
        result[dock] = sorted(leaves)
    return result


def storing(network: Network, item: str | None) -> set[int]:
    """Return the cross-docks at which goods of an item (None: of any) may stay overnight."""
    rows: Any = network.head.get("storage", ())
    named = {row["site"] for row in rows if item is None or row.get("item") in (None, item)}
    return {place for place, site in enumerate(network.sites) if site.id in named}


def _first_arrivals(
    network: Network, plain: list[int], docks: set[int], stocked: set[int]
) -> tuple[dict[int, set[int]], set[tuple[int, int, int]]]:
    """Return when departures and goods from stock reach each cross-dock, and lanes between docks.

    Those are (origin, destination, days of transit), each kind once.
    """
    lanes = network.lanes
    into = np.flatnonzero(np.isin(lanes.destination, np.array(sorted(docks))))
    arrivals: dict[int, set[int]] = {dock: set() for dock in docks}
    onward: set[tuple[int, int, int]] = set()
    kinds = set(
        zip(
            lanes.origin[into].tolist(),
            lanes.destination[into].tolist(),
            lanes.transit_days.values[into].tolist(),
            lanes.departs.codes[into].tolist(),
            lanes.arrives.codes[into].tolist(),
            strict=True,
        )
    )
    for origin, dock, transit, departs, arrives in kinds:
        if arrives >= 0:
            arrivals[dock].add(day_of(lanes.arrives.values[arrives]))
        elif departs >= 0:
            arrivals[dock].add(day_of(lanes.departs.values[departs]) + transit)
        else:
            if origin not in docks or origin in stocked:
                arrivals[dock].update(day + transit for day in plain)
            if origin in docks:
                onward.add((origin, dock, transit))
    return arrivals, onward


def closed_departures(network: Network, rows: IntArray) -> BoolArray:
    """Return which of the lanes ``rows`` closed before the plan is made."""
    lanes = network.lanes
    made = _instant(str(network.head.get("planned_at", network.head["cut_off"])))
    last = {
        (closes, departs): _instant(
            lanes.closes.values[closes] if closes >= 0 else lanes.departs.values[departs]
        )
        < made
        for closes, departs in set(
            zip(lanes.closes.codes[rows].tolist(), lanes.departs.codes[rows].tolist(), strict=True)
        )
        if departs >= 0
    }
    pairs = zip(lanes.closes.codes[rows].tolist(), lanes.departs.codes[rows].tolist(), strict=True)
    return np.array([last.get(pair, False) for pair in pairs], dtype=np.bool_)


def _instant(text: str) -> tuple[datetime, str]:
    """Return an instant to compare: its whole second, and the digits below it."""
    whole, point, rest = text.partition(".")
    if not point:
        return datetime.fromisoformat(text).astimezone(UTC), ""
    digits = rest.rstrip("Z").split("+")[0].split("-")[0]
    zone = rest[len(digits) :]
    at = datetime.fromisoformat(whole + zone)
    return at.astimezone(UTC), digits
