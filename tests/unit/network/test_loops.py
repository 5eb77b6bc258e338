"""Loops below zero: found exactly when an independent search finds one, and named truly."""

from dataclasses import replace
from fractions import Fraction
from typing import Any

import networkx as nx
import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from service.network.columns import Network
from service.network.files.json import Number
from service.network.loops import loop_below_zero
from service.network.options import Options
from service.network.reach import LaneUse
from service.network.reading import read_network
from service.network.units import per_unit


def decimal(tenths: int) -> str:
    """Return tenths as decimal text."""
    sign = "-" if tenths < 0 else ""
    return f"{sign}{abs(tenths) // 10}.{abs(tenths) % 10}"


@st.composite
def docks(draw: st.DrawFn) -> dict[str, Any]:
    """Draw lanes among cross-docks, some paid by the pallet of 3, some docks paying to be used."""
    count = draw(st.integers(2, 6))
    ids = [f"D{number}" for number in range(count)]
    pairs = [(origin, to) for origin in ids for to in ids if origin != to]
    lanes = [
        {
            "id": f"L{number}",
            "origin": origin,
            "destination": to,
            "item": "A",
            "unit_cost": decimal(draw(st.integers(-6, 12))),
            "measure": draw(st.sampled_from(["unit", "pallet"])),
        }
        for number, (origin, to) in enumerate(draw(st.lists(st.sampled_from(pairs), max_size=12)))
    ]
    sites = [
        {"id": dock, "roles": ["cross_dock"], "handling_cost": decimal(draw(st.integers(-2, 4)))}
        for dock in ids
    ]
    return {
        "format": Number("1"),
        "currency": "EUR",
        "cut_off": "2026-02-03T16:00:00Z",
        "items": [{"id": "A", "unit": "bag", "packs": [{"unit": "pallet", "contains": "3"}]}],
        "sites": sites,
        "supply": [],
        "demand": [],
        "lanes": lanes,
    }


def price(network: Network, row: int) -> Fraction:
    """Return what one unit costs on a lane, handling where it arrives included."""
    lanes, item = network.lanes, network.items[0]
    measure = lanes.measure.text(row)
    rate = lanes.unit_cost.fraction(row)
    assert measure is not None
    assert rate is not None
    factor = per_unit(item, measure)
    assert factor is not None
    return rate * factor + network.sites[int(lanes.destination[row])].handling("A")


@given(docks())
def test_a_loop_is_found_exactly_when_there_is_one(document: dict[str, Any]) -> None:
    """Networkx searches the same lanes in whole thirtieths of the currency."""
    reading = read_network(dict(document), Options())
    lanes = document["lanes"]
    graph = nx.MultiDiGraph()
    handling = {site["id"]: Fraction(site["handling_cost"]) for site in document["sites"]}
    for lane in lanes:
        factor = Fraction(1, 3) if lane["measure"] == "pallet" else Fraction(1)
        cost = Fraction(lane["unit_cost"]) * factor + handling[lane["destination"]]
        graph.add_edge(lane["origin"], lane["destination"], weight=int(cost * 30))
    expected = nx.negative_edge_cycle(graph)

    codes = [fault.code for fault in reading.faults.kept]

    assert codes == (["loop_below_zero"] if expected else [])


@given(docks())
def test_the_lanes_named_are_a_loop_below_zero(document: dict[str, Any]) -> None:
    """Whoever is told must be able to add the costs up."""
    for site in document["sites"]:
        site["handling_cost"] = "0"
    costs = [lane["unit_cost"] for lane in document["lanes"]]
    for lane in document["lanes"]:
        lane["unit_cost"] = "1"
    network = read_network(document | {"lanes": document["lanes"]}, Options()).network
    assert network is not None
    names = network.lanes.ids.tolist()
    values = np.array([int(Fraction(costs[int(name[1:])]) * 10) for name in names], dtype=np.int64)
    network = _with_costs(network, values)

    loop = loop_below_zero(network, LaneUse(network), 0)

    if loop is None:
        return
    ends = [
        (int(network.lanes.origin[row]), int(network.lanes.destination[row]))
        for row in loop.tolist()
    ]
    assert all(ends[at][1] == ends[(at + 1) % len(ends)][0] for at in range(len(ends)))
    assert sum(price(network, row) for row in loop.tolist()) < 0


def _with_costs(network: Network, values: np.ndarray[Any, np.dtype[np.int64]]) -> Network:
    """Return a network whose lanes cost ``values`` tenths."""
    column = replace(network.lanes.unit_cost, values=values, exponent=1)
    return replace(network, lanes=replace(network.lanes, unit_cost=column))
