"""Counts of work: never below what compiling comes to; and which networks are alike."""

import orjson
import pytest
from hypothesis import given

from service.network.columns import Network
from service.network.files.json import read_json
from service.network.options import Options, read_options
from service.network.reading import read_network
from service.network.workload import Workload, likeness_of, workload_of
from service.planning.model.compile import compile_network
from tests.factories import Document
from tests.random_networks import RandomNetwork
from tests.strategies import networks

DEFAULTS = Options()
NETWORK: Document = {
    "format": 1,
    "currency": "EUR",
    "cut_off": "2026-02-03T16:00:00+01:00",
    "items": [{"id": "COARSE", "unit": "bag"}, {"id": "FINE", "unit": "bag"}],
    "sites": [
        {"id": "EAST", "roles": ["warehouse", "ship_to"]},
        {"id": "HUB", "roles": ["cross_dock"]},
        {"id": "PIT", "roles": ["warehouse"]},
        {"id": "YARD", "roles": ["ship_to"]},
    ],
    "supply": [
        {"site": "EAST", "item": "COARSE", "quantity": "5"},
        {"site": "EAST", "item": "COARSE", "quantity": "5", "lot": "2"},
        {"site": "PIT", "item": "FINE", "quantity": "5"},
    ],
    "demand": [{"site": "YARD", "item": "COARSE", "quantity": "4"}],
    "lanes": [
        {"origin": "EAST", "destination": "HUB", "unit_cost": "1"},
        {"origin": "HUB", "destination": "YARD", "unit_cost": "1"},
        {"origin": "PIT", "destination": "YARD", "unit_cost": "1"},
        {"origin": "PIT", "destination": "EAST", "unit_cost": "1", "item": "FINE"},
    ],
}


def network_of(document: Document, options: Options = DEFAULTS) -> Network:
    """Read a network that has no faults."""
    value = read_json(orjson.dumps(document), nesting_max=16).value
    reading = read_network(value, options)
    assert reading.network is not None, reading.faults.kept
    return reading.network


def test_counts_are_those_of_the_rows() -> None:
    """By hand: COARSE may leave EAST and the hub (2 lanes), FINE arrives where? At the hub alone.

    COARSE: 2 lanes leave from EAST or HUB, 3 arrive at YARD or HUB: at most 2. FINE: its own lane,
    and of the others 2 leave from PIT or HUB and 1 arrives at HUB, as nobody wants it: 1 + 1.
    Sites: COARSE at 2 + 2 * 2 of 4, FINE at 1 + 2 * 2 of 4.
    """
    assert workload_of(network_of(NETWORK), file_bytes=7) == Workload(
        items=2,
        sites=4,
        supply_rows=3,
        order_lines=1,
        lanes=4,
        usable_lanes=4,
        usable_lanes_of_one=2,
        places=8,
        file_bytes=7,
    )


@given(network=networks())
def test_bounds_hold_for_what_compiling_finds(network: RandomNetwork) -> None:
    """An estimate from counts that were too low would let in what cannot be planned."""
    options, _ = read_options(network.options)
    assert options is not None
    read = network_of(network.document, options)

    workload = workload_of(read, file_bytes=0)

    compiled = compile_network(read, options)
    found = [own.lanes.rows.shape[0] for own in compiled.items]
    assert sum(found) <= workload.usable_lanes
    assert max(found) <= workload.usable_lanes_of_one


@pytest.mark.parametrize(
    ("change", "alike"),
    [
        ({"demand": []}, True),
        ({"supply": NETWORK["supply"][:1]}, True),
        ({"lanes": NETWORK["lanes"][:2]}, True),
        ({"cut_off": "2026-02-04T16:00:00+01:00"}, True),
        ({"currency": "NOK"}, False),
        ({"items": [*NETWORK["items"], {"id": "LUMPS", "unit": "bag"}]}, False),
        ({"sites": [*NETWORK["sites"], {"id": "WEST", "roles": ["warehouse"]}]}, False),
        ({"sites": [*NETWORK["sites"], {"id": "YARD-2", "roles": ["ship_to"]}]}, True),
    ],
)
def test_alike_are_networks_of_the_same_warehouses_items_and_currency(
    change: Document, *, alike: bool
) -> None:
    """What changes from night to night leaves prices of stock about where they were."""
    one, other = network_of(NETWORK), network_of(NETWORK | change)

    assert (likeness_of(one) == likeness_of(other)) is alike
