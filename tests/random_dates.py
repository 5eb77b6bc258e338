"""Dates for random networks: transit days, departures, windows, wishes, later stock and periods."""

import copy
from datetime import date, timedelta
from random import Random
from typing import Any

from tests.factories import Document

TODAY = date(2026, 2, 3)  # the date of ``tests.factories.CUT_OFF``


def day(offset: int) -> str:
    """Return the date so many days after the cut-off."""
    return (TODAY + timedelta(days=offset)).isoformat()


def moment(offset: int, hour: int) -> str:
    """Return an hour of a date in the offset of the cut-off."""
    return f"{day(offset)}T{hour:02d}:00:00+01:00"


def with_dates(document: Document, rng: Random) -> Document:
    """Return a network with dates strewn over it; what must move on several days may be refused."""
    dated = copy.deepcopy(document)
    for lane in dated["lanes"]:
        _date_lane(lane, rng)
    for row in dated["supply"]:
        if rng.random() < 0.25:
            row["available_from"] = day(rng.randint(-1, 4))
    for line in dated["demand"]:
        _date_line(line, rng)
    if rng.random() < 0.3:
        dated["periods"] = sorted({day(rng.randint(-1, 4)) for _ in range(3)} | {day(0)})
    docks = [site["id"] for site in dated["sites"] if "cross_dock" in site["roles"]]
    if docks and rng.random() < 0.4:
        dated["storage"] = [
            {"site": site} for site in rng.sample(docks, rng.randint(1, len(docks)))
        ]
    if rng.random() < 0.2:
        dated["planned_at"] = moment(0, 9)
    for site in dated["sites"]:
        if rng.random() < 0.2:
            site["time_zone"] = rng.choice(["Europe/Oslo", "America/New_York", "Asia/Tokyo"])
    return dated


def _date_lane(lane: dict[str, Any], rng: Random) -> None:
    """Give a lane no date, days of transit, or a departure."""
    kind = rng.random()
    if kind < 0.4:
        lane["transit_days"] = rng.randint(0, 3)
    elif kind < 0.75:
        leaves = rng.randint(-1, 4)
        lane["departs"] = moment(leaves, rng.randint(6, 20))
        if rng.random() < 0.4:
            lane["closes"] = moment(leaves, rng.randint(0, 6))
        if rng.random() < 0.5:
            lane["arrives"] = moment(leaves + rng.randint(0, 2), 21)
        elif rng.random() < 0.5:
            lane["transit_days"] = rng.randint(0, 2)


def _date_line(line: dict[str, Any], rng: Random) -> None:
    """Give an order line a window, a wish, and sometimes money for lateness."""
    if rng.random() < 0.3:
        line["earliest"] = day(rng.randint(-1, 3))
    if rng.random() < 0.6:
        line["due"] = day(rng.randint(-1, 4))
        if rng.random() < 0.3:
            line["late_cost_per_day"] = str(rng.randint(0, 4))
    if rng.random() < 0.3:
        line["latest"] = day(rng.randint(3, 6))


def small_network(rng: Random) -> Document:
    """Return a dated network of one item whose cross-docks lead in no circle, in whole numbers."""
    stores = [f"W{number}" for number in range(rng.randint(1, 2))]
    docks = [f"X{number}" for number in range(rng.randint(0, 3))]
    shops = [f"S{number}" for number in range(rng.randint(1, 3))]
    sites: list[dict[str, Any]] = [{"id": site, "roles": ["warehouse"]} for site in stores]
    sites += [{"id": site, "roles": ["cross_dock"]} for site in docks]
    sites += [{"id": site, "roles": ["ship_to"]} for site in shops]
    for site in sites:
        # A cross-dock has no stock here: that would leave on the days of what arrives, too.
        if rng.random() < 0.3:
            own = {"ship_to"} if site["id"] in docks else {"warehouse", "ship_to"}
            site["roles"] = sorted({*site["roles"], *own})
        if rng.random() < 0.3:
            site["handling_cost"] = str(rng.randint(1, 3))
    holding = [site["id"] for site in sites if "warehouse" in site["roles"]]
    wanting = [site["id"] for site in sites if "ship_to" in site["roles"]]
    # From left to right, so that no way comes back.
    order = [*stores, *docks, *shops]
    starts = [site["id"] for site in sites if {"warehouse", "cross_dock"} & set(site["roles"])]
    ends = [site["id"] for site in sites if {"ship_to", "cross_dock"} & set(site["roles"])]
    lanes: list[dict[str, Any]] = []
    for number in range(rng.randint(3, 12)):
        pairs = [(a, b) for a in starts for b in ends if order.index(a) < order.index(b)]
        if not pairs:
            break
        origin, destination = rng.choice(pairs)
        lane: dict[str, Any] = {"id": f"L{number}", "origin": origin, "destination": destination}
        lane["unit_cost"] = str(rng.randint(0, 9))
        if rng.random() < 0.6:
            lane["capacity"] = str(rng.randint(1, 8))
        lanes.append(lane)
    document: Document = {
        "format": 1,
        "currency": "USD",
        "cut_off": moment(0, 16),
        "items": [{"id": "GOODS", "unit": "unit"}],
        "sites": sites,
        "supply": [
            {
                "site": rng.choice(holding),
                "item": "GOODS",
                "quantity": str(rng.randint(0, 9)),
                "unit_cost": str(rng.randint(0, 3)),
                "lot": f"LOT{number}",
            }
            for number in range(rng.randint(1, 4))
        ],
        "demand": [
            {
                "reference": f"R{number}",
                "site": rng.choice(wanting),
                "item": "GOODS",
                "quantity": str(rng.randint(1, 8)),
                **(
                    {"shortage_cost": str(rng.randint(1, 20))}
                    if rng.random() < 0.2
                    else {"priority": rng.randint(1, 9)}
                ),
            }
            for number in range(rng.randint(1, 5))
        ],
        "lanes": lanes,
    }
    dated = with_dates(document, rng)
    dated.pop("storage", None)
    # Where the oracle knows when lanes leave, and nobody at the dock itself waits for goods.
    places = [
        {"site": site["id"]}
        for site in sites
        if site["roles"] == ["cross_dock"] and rng.random() < 0.6
    ]
    if places and "periods" in dated:
        dated["storage"] = places
    for site in dated["sites"]:
        # The oracle reads dates as they are written.
        site.pop("time_zone", None)
    return dated
