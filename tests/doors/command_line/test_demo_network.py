"""The demo network: the same everywhere, and what the documents say of it."""

from collections import Counter
from fractions import Fraction
from typing import Any

import orjson

from service.doors.command_line.demo_network import _Numbers, demo_bytes


def network() -> dict[str, Any]:
    """Return the demo network as a client would read it."""
    document: dict[str, Any] = orjson.loads(demo_bytes())
    return document


def test_the_stream_of_numbers_is_the_one_of_the_c_standard() -> None:
    """From 1: 1 103 515 245 + 12 345 = 1 103 527 590, and a 4096th of it is 269 415.9."""
    assert _Numbers(1).below(1_000_000) == 269_415


def test_the_network_is_the_same_each_time() -> None:
    """Everybody who reads the documents must see the plan that they describe."""
    assert demo_bytes() == demo_bytes()


def test_only_road_salt_in_bags_is_scarce() -> None:
    """Priorities show on what is short; the rest shows that it need not be."""
    wanted: Counter[str] = Counter()
    for row in network()["demand"]:
        bags = 40 if row.get("unit") == "pallet" else 1
        wanted[row["item"]] += int(Fraction(row["quantity"]) * bags * 2)
    there: Counter[str] = Counter()
    for row in network()["supply"]:
        there[row["item"]] += int(Fraction(row["quantity"]) * 2)

    assert [item for item in there if wanted[item] > there[item]] == ["ROAD-25"]


def test_every_yard_has_a_way_from_three_depots_and_the_nearest_is_capped() -> None:
    """Otherwise the choice between warehouses would be no choice."""
    lanes = network()["lanes"]
    by_yard: dict[str, list[dict[str, Any]]] = {}
    for lane in lanes:
        if lane["destination"].startswith("YARD-") and lane["origin"].startswith("DEP-"):
            by_yard.setdefault(lane["destination"], []).append(lane)

    assert len(by_yard) == 40
    for roads in by_yard.values():
        assert len(roads) == 3
        nearest = min(roads, key=lambda lane: Fraction(lane["unit_cost"]))
        assert [road for road in roads if "capacity" in road] == [nearest]


def test_the_island_lies_in_the_open_sea() -> None:
    """A demo must not look like advice about anybody's real town: 51 to 53 N, 34 to 36 W."""
    for site in network()["sites"]:
        assert 51 <= Fraction(site["latitude"]) < 53
        assert -36 < Fraction(site["longitude"]) < -34
