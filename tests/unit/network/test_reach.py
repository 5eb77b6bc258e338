"""Which item can use which lane: the array search against one that walks lane by lane."""

from typing import Any

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from service.network.columns import Network
from service.network.files.json import Number
from service.network.options import Options
from service.network.reach import LaneUse
from service.network.reading import read_network

HEAD = {"format": Number("1"), "currency": "EUR", "cut_off": "2026-02-03T16:00:00Z"}
ROLES = [
    ["warehouse"],
    ["cross_dock"],
    ["ship_to"],
    ["warehouse", "cross_dock"],
    ["warehouse", "ship_to"],
    ["cross_dock", "ship_to"],
    ["warehouse", "cross_dock", "ship_to"],
]


@st.composite
def networks(draw: st.DrawFn) -> dict[str, Any]:
    """Draw a small network of two items in which most lanes carry any item."""
    count = draw(st.integers(2, 6))
    sites = [{"id": f"S{number}", "roles": draw(st.sampled_from(ROLES))} for number in range(count)]
    sends = [site["id"] for site in sites if set(site["roles"]) & {"warehouse", "cross_dock"}]
    takes = [site["id"] for site in sites if set(site["roles"]) & {"cross_dock", "ship_to"}]
    stores = [site["id"] for site in sites if "warehouse" in site["roles"]]
    wants = [site["id"] for site in sites if "ship_to" in site["roles"]]
    items = st.sampled_from(["A", "B"])
    quantities = st.sampled_from(["0", "3"])
    pairs = [(origin, to) for origin in sends for to in takes if origin != to]
    lanes = [
        {
            "id": f"L{number}",
            "origin": origin,
            "destination": to,
            "unit_cost": "1",
            "item": draw(st.sampled_from([None, None, "A", "B"])),
            "must_ship": draw(st.sampled_from([None, None, "1"])),
            "per": "item",
        }
        for number, (origin, to) in enumerate(
            draw(st.lists(st.sampled_from(pairs), max_size=9)) if pairs else []
        )
    ]
    rows = {
        name: [
            {"site": site, "item": draw(items), "quantity": draw(quantities)}
            for site in (draw(st.lists(st.sampled_from(places), max_size=3)) if places else [])
        ]
        for name, places in (("supply", stores), ("demand", wants))
    }
    head = [{"id": "A", "unit": "bag"}, {"id": "B", "unit": "bag"}]
    return {**HEAD, "items": head, "sites": sites, "lanes": lanes, **rows}


def walk(network: Network, item: int, starts: set[int], *, back: bool) -> set[int]:
    """Return where one can be after zero or more lanes of the item, on through cross-docks."""
    lanes = network.lanes
    reached = set(starts)
    open_sites = list(starts)
    while open_sites:
        site = open_sites.pop()
        for row in range(len(lanes)):
            ends = int(lanes.origin[row]), int(lanes.destination[row])
            tail, head = reversed(ends) if back else ends
            if tail == site and int(lanes.item[row]) in (-1, item) and head not in reached:
                reached.add(head)
                if "cross_dock" in network.sites[head].roles:
                    open_sites.append(head)
    return reached


def usable_by_walking(network: Network, item: int) -> list[int]:
    """Return the usable lanes by the words of the definition, one lane at a time."""
    supply, demand, lanes = network.supply, network.demand, network.lanes
    stock = {
        int(supply.site[row])
        for row in range(len(supply))
        if supply.item[row] == item and (supply.quantity.fraction(row) or 0) > 0
    }
    goals = {
        int(demand.site[row])
        for row in range(len(demand))
        if demand.item[row] == item and (demand.quantity.fraction(row) or 0) > 0
    }
    docks = {place for place, site in enumerate(network.sites) if "cross_dock" in site.roles}
    forced = {
        int(lanes.origin[row])
        for row in range(len(lanes))
        if lanes.item[row] == item and lanes.must_ship.present[row]
    }
    usable = []
    for row in range(len(lanes)):
        if lanes.item[row] == item:
            usable.append(row)
        elif lanes.item[row] == -1:
            origin, destination = int(lanes.origin[row]), int(lanes.destination[row])
            from_stock = origin in stock or (
                origin in docks and origin in walk(network, item, stock, back=False)
            )
            onward = {destination}
            if destination in docks:
                onward = walk(network, item, {destination}, back=False)
            if from_stock and (onward & goals or onward & forced & docks):
                usable.append(row)
    return usable


@given(networks())
def test_usable_lanes_are_those_of_the_definition(document: dict[str, Any]) -> None:
    """Planning, proof and limits all rest on this answer."""
    for lane in document["lanes"]:
        lane["per"] = None if lane["item"] else "item"
    reading = read_network(document, Options())
    assert reading.network is not None, reading.faults.kept
    use = LaneUse(reading.network)

    for item in range(2):
        assert use.rows(item).tolist() == usable_by_walking(reading.network, item)


@given(networks())
def test_stock_behind_a_place_is_what_a_walk_back_finds(document: dict[str, Any]) -> None:
    """It decides which origins an order line may name."""
    reading = read_network(document, Options())
    network = reading.network
    assert network is not None
    use = LaneUse(network)

    for item in range(2):
        rows = use.rows(item)
        for place, site in enumerate(network.sites):
            stock = set(np.flatnonzero(use.stock(item)).tolist())
            behind = {place}
            if "cross_dock" in site.roles:
                behind = _walk_back(network, rows.tolist(), place)
            assert set(np.flatnonzero(use.stock_reaching(item, place)).tolist()) == behind & stock


def _walk_back(network: Network, rows: list[int], place: int) -> set[int]:
    """Return the sites from which lanes of ``rows`` lead to ``place``, through cross-docks."""
    reached, open_sites = {place}, [place]
    while open_sites:
        site = open_sites.pop()
        for row in rows:
            before = int(network.lanes.origin[row])
            if int(network.lanes.destination[row]) == site and before not in reached:
                reached.add(before)
                if "cross_dock" in network.sites[before].roles:
                    open_sites.append(before)
    return reached


def test_a_long_chain_of_cross_docks_is_followed_to_its_end() -> None:
    """Depth costs rounds, not stack: 2,000 sites in a row."""
    count = 2000
    sites = [{"id": "W", "roles": ["warehouse"]}]
    sites += [{"id": f"D{number:04}", "roles": ["cross_dock"]} for number in range(count)]
    sites.append({"id": "Z", "roles": ["ship_to"]})
    ids = [site["id"] for site in sites]
    document = {
        **HEAD,
        "items": [{"id": "A", "unit": "bag"}],
        "sites": sites,
        "supply": [{"site": "W", "item": "A", "quantity": "1"}],
        "demand": [{"site": "Z", "item": "A", "quantity": "1"}],
        "lanes": {"origin": ids[:-1], "destination": ids[1:], "unit_cost": ["-1"] * (count + 1)},
    }

    reading = read_network(document, Options())

    assert reading.network is not None
    assert len(LaneUse(reading.network).rows(0)) == count + 1
