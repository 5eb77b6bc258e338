"""Where each order line's goods come from: sources that add up, legs that chain, few splits."""

from collections import Counter, defaultdict
from fractions import Fraction
from typing import Any

import numpy as np
from hypothesis import given

from service.network.naming import lane_names
from tests.factories import Planned, plan_network
from tests.random_networks import RandomNetwork
from tests.strategies import networks

Source = tuple[str, str | None, tuple[str, ...]]


def planned_with_shortages(network: RandomNetwork) -> Planned:
    """Plan with shortages allowed, so that there is a plan to read."""
    return plan_network(network.document, **(network.options | {"shortages": "allow"}))


def ends_of_lanes(planned: Planned) -> dict[str, tuple[str, str]]:
    """Return where each lane begins and ends, by its name."""
    network = planned.network
    lanes = network.lanes
    names = lane_names(network, np.arange(len(lanes)))
    return {
        name: (network.sites[start].id, network.sites[end].id)
        for name, start, end in zip(names, lanes.origin, lanes.destination, strict=True)
    }


def key(source: dict[str, Any]) -> Source:
    """Return what makes a source one: where it is drawn, from which lot, by which way."""
    return source["origin"], source["lot"], tuple(leg["lane"] for leg in source["legs"])


@given(network=networks())
def test_sources_add_up_to_what_is_served(network: RandomNetwork) -> None:
    """No source is empty or stands twice, and each is of the line's own item."""
    planned = planned_with_shortages(network)

    for line in planned.plan["order_lines"]:
        quantities = [Fraction(source["quantity"]) for source in line["sources"]]
        assert all(quantity > 0 for quantity in quantities)
        assert sum(quantities) == Fraction(line["served"])
        assert {source["item"] for source in line["sources"]} <= {line["item"]}
        keys = [key(source) for source in line["sources"]]
        assert len(keys) == len(set(keys))


@given(network=networks())
def test_legs_chain_from_stock_to_the_line(network: RandomNetwork) -> None:
    """Each leg begins where the former ended, goods pass cross-docks only, origins are allowed."""
    planned = planned_with_shortages(network)

    ends = ends_of_lanes(planned)
    docks = {s["id"] for s in network.document["sites"] if "cross_dock" in s["roles"]}
    allowed = {row["reference"]: row.get("origins") for row in network.document["demand"]}
    for line in planned.plan["order_lines"]:
        for source in line["sources"]:
            place = source["origin"]
            for leg in source["legs"]:
                start, end = ends[leg["lane"]]
                assert start == place
                assert start == source["origin"] or start in docks
                place = end
            assert place == line["site"]
            named = allowed[line["reference"]]
            assert named is None or source["origin"] in named


@given(network=networks())
def test_lines_take_no_more_from_a_lane_or_a_lot_than_there_is(network: RandomNetwork) -> None:
    """What lines take adds up to at most the plan line, and to at most the rows of a lot."""
    planned = planned_with_shortages(network)

    by_lane: dict[tuple[str, str], Fraction] = defaultdict(Fraction)
    by_lot: dict[tuple[str, str, str | None], Fraction] = defaultdict(Fraction)
    for line in planned.plan["order_lines"]:
        for source in line["sources"]:
            quantity = Fraction(source["quantity"])
            by_lot[source["origin"], source["item"], source["lot"]] += quantity
            for leg in source["legs"]:
                by_lane[leg["lane"], line["item"]] += quantity
    carried = {
        (row["lane"], row["item"]): Fraction(row["quantity"]) for row in planned.plan["plan_lines"]
    }
    assert all(quantity <= carried[lane] for lane, quantity in by_lane.items())
    lots: dict[tuple[str, str], set[str | None]] = defaultdict(set)
    for row in network.document["supply"]:
        lots[row["site"], row["item"]].add(row.get("lot"))
    assert all(lot in lots[site, item] for site, item, lot in by_lot)


@given(network=networks())
def test_fewer_lines_are_split_than_there_are_sources(network: RandomNetwork) -> None:
    """Within lines that nothing tells apart, k sources split at most k - 1 of them.

    Every row of stock is a source of its own, also where two of a site have the same lot.
    """
    planned = planned_with_shortages(network)

    groups: dict[tuple[Any, ...], list[dict[str, Any]]] = defaultdict(list)
    sent = {row["reference"]: row for row in network.document["demand"]}
    rows = Counter((row["site"], row["item"], row.get("lot")) for row in network.document["supply"])
    for line in planned.plan["order_lines"]:
        origins = sent[line["reference"]].get("origins")
        groups[
            line["site"],
            line["item"],
            line["priority"],
            line.get("shortage_cost"),
            tuple(sorted(origins)) if origins is not None else None,
        ].append(line)
    for lines in groups.values():
        item = lines[0]["item"]
        ways = {key(source) for line in lines for source in line["sources"]}
        sources = sum(rows[origin, item, lot] for origin, lot, _ in ways)
        split = [line for line in lines if len(line["sources"]) > 1]
        assert len(split) <= max(sources - 1, 0)
