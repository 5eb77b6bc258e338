"""A network small enough to solve on paper, with the plan and the proof that paper gives.

Two depots have 10 and 3 sacks. Yard A wants 8 with priority 1, yard B 7 with priority 2. A sack
costs 2 from the first depot to A and 4 to B, 3 from the second to A and 9 to B.

All 13 sacks go, so that 2 are short, and they are B's, whose priority is the later one. The second
depot's 3 sacks save 4 - 9 + 3 - 2 = -4 each if they go to A rather than to B, so that the first
sends 5 to A and 5 to B: 5 * 2 + 5 * 4 + 3 * 3 = 39.

Prices, with the root at 0: eleven nodes and a dearest lane of 9 make the base 2 * 11 * 9 + 1 = 199,
the weights 2 * 199 and 199. B is short, so its price is its weight 199; what flows has no reduced
cost: the first depot 199 - 4 = 195, A 195 + 2 = 197, the second depot 197 - 3 = 194. The lane from
there to B then has 9 + 194 - 199 = 4 and stays empty; both stocks are below 0 and are used up.
"""

import tempfile
from pathlib import Path
from typing import Any

import orjson

from service.network.canonical import canonical_json, digest, network_digest, read_network
from service.network.columns import Network
from service.network.options import Options
from tests.factories import CUT_OFF, network_document, take_in

Document = dict[str, Any]

BODY = network_document(
    items=[{"id": "SALT", "unit": "sack", "weight_kg": "25"}],
    sites=[
        {"id": "D1", "roles": ["warehouse"]},
        {"id": "D2", "roles": ["warehouse"]},
        {"id": "YA", "roles": ["ship_to"]},
        {"id": "YB", "roles": ["ship_to"]},
    ],
    supply=[
        {"site": "D1", "item": "SALT", "quantity": "10", "lot": "L1"},
        {"site": "D2", "item": "SALT", "quantity": "3"},
    ],
    demand=[
        {"reference": "A", "site": "YA", "item": "SALT", "quantity": "8", "priority": 1},
        {"reference": "B", "site": "YB", "item": "SALT", "quantity": "7", "priority": 2},
    ],
    lanes=[
        {"id": "1A", "origin": "D1", "destination": "YA", "unit_cost": "2"},
        {"id": "1B", "origin": "D1", "destination": "YB", "unit_cost": "4"},
        {"id": "2A", "origin": "D2", "destination": "YA", "unit_cost": "3"},
        {"id": "2B", "origin": "D2", "destination": "YB", "unit_cost": "9"},
    ],
)
OPTIONS = Options()


def network_from(body: Document, options: Options = OPTIONS) -> Network:
    """Return the network that a body says, through the real intake."""
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        report = take_in(orjson.dumps(body), folder, options)
        assert report.status == "accepted", report
        return read_network(folder / "network.zip")


NETWORK = network_from(BODY)


def _plan_line(lane: str, origin: str, destination: str, quantity: int, cost: int) -> Document:
    """Return a plan line of the salt without handling or cost of stock."""
    money = str(quantity * cost)
    return {
        "lane": lane,
        "origin": origin,
        "destination": destination,
        "item": "SALT",
        "quantity": str(quantity),
        "unit_cost": str(cost),
        "transport_cost": money,
        "supply_cost": "0",
        "handling_cost": "0",
        "charges": "0",
        "cost": money,
    }


def _source(origin: str, lot: str | None, quantity: str, lane: str) -> Document:
    """Return a source of an order line over one lane."""
    return {
        "origin": origin,
        "item": "SALT",
        "lot": lot,
        "quantity": quantity,
        "legs": [{"lane": lane}],
    }


def _consignment(lane: str, origin: str, destination: str, quantity: int, cost: int) -> Document:
    """Return what is on a lane: of pallets and volume the item says nothing."""
    return {
        "lane": lane,
        "carrier": None,
        "origin": origin,
        "destination": destination,
        "pallets": "unknown",
        "weight_kg": str(25 * quantity),
        "volume_m3": "unknown",
        "cost": str(cost),
        "order_references": ["B" if destination == "YB" else "A"],
    }


def documents() -> tuple[Document, Document]:
    """Return plan and certificate, written by hand from the text above."""
    digests = {
        "network_digest": network_digest(NETWORK),
        "options_digest": digest(canonical_json(OPTIONS.to_document())),
    }
    plan: Document = {
        "format": 1,
        "status": "planned",
        "method": "min_cost_flow",
        "method_reasons": [],
        "name": None,
        "currency": "USD",
        "cut_off": CUT_OFF,
        "release_by": None,
        **digests,
        "total_cost": "39",
        "total_cost_rounded": "39.00",
        "rounding_difference": "0",
        "cost_parts": {
            "supply": "0",
            "handling": "0",
            "transport": "39",
            "charges": "0",
            "shortage": "0",
            "lateness": "0",
        },
        "totals": {
            "lines_complete": 1,
            "lines_in_part": 1,
            "lines_none": 0,
            "set_aside": 0,
            "quantities": [
                {
                    "item": "SALT",
                    "unit": "sack",
                    "wanted": "15",
                    "served": "13",
                    "short": "2",
                    "weight_kg": "325",
                }
            ],
        },
        "plan_lines": [
            _plan_line("1A", "D1", "YA", 5, 2),
            _plan_line("1B", "D1", "YB", 5, 4),
            _plan_line("2A", "D2", "YA", 3, 3),
        ],
        "order_lines": [
            {
                "reference": "A",
                "order": None,
                "site": "YA",
                "item": "SALT",
                "quantity": "8",
                "served": "8",
                "short": "0",
                "priority": 1,
                "sources": [_source("D1", "L1", "5", "1A"), _source("D2", None, "3", "2A")],
            },
            {
                "reference": "B",
                "order": None,
                "site": "YB",
                "item": "SALT",
                "quantity": "7",
                "served": "5",
                "short": "2",
                "priority": 2,
                "sources": [_source("D1", "L1", "5", "1B")],
            },
        ],
        "consignments": [
            _consignment("1A", "D1", "YA", 5, 10),
            _consignment("1B", "D1", "YB", 5, 20),
            _consignment("2A", "D2", "YA", 3, 9),
        ],
        "shortages": [
            {
                "reference": "B",
                "site": "YB",
                "item": "SALT",
                "priority": 2,
                "quantity": "2",
                "reason": "no_stock",
                "next_chance": None,
            }
        ],
        "site_use": [
            {
                "site": "D1",
                "item": "SALT",
                "available": "10",
                "shipped": "10",
                "kept": "0",
                "left": "0",
            },
            {
                "site": "D2",
                "item": "SALT",
                "available": "3",
                "shipped": "3",
                "kept": "0",
                "left": "0",
            },
        ],
        "rules_in_force": [],
        "set_aside": [],
        "warnings": [],
        "certificate": {
            "format": 1,
            "feasible": True,
            "lower_bound": "39",
            "gap": "0",
            "lexicographic": "proved",
            "solver_bound": None,
            "reproducible": True,
            "network_digest": digests["network_digest"],
        },
    }
    prices = [
        *(("D1", side, None, 195) for side in ("in", "out")),
        *(("D2", side, None, 194) for side in ("in", "out")),
        ("YA", "demand", "A", 197),
        *(("YA", side, None, 197) for side in ("in", "out")),
        ("YB", "demand", "B", 199),
        *(("YB", side, None, 199) for side in ("in", "out")),
    ]
    certificate: Document = {
        "format": 1,
        "method": "min_cost_flow",
        **digests,
        "currency": "USD",
        "cost_scale": "1",
        "total_cost": "39",
        "lower_bound": "39",
        "gap": "0",
        "lexicographic": "proved",
        "versions": {},
        "steps": [
            {"item": "SALT", "of": "shortage", "priority": 1, "achieved": "0", "bound": "0"},
            {"item": "SALT", "of": "shortage", "priority": 2, "achieved": "2", "bound": "2"},
            {"item": "SALT", "of": "cost", "achieved": "39", "bound": "39"},
        ],
        "items": [
            {
                "item": "SALT",
                "base": "199",
                "draws": [
                    {"site": "D1", "tier": 1, "quantity": "10"},
                    {"site": "D2", "tier": 1, "quantity": "3"},
                ],
                "kept": [],
                "serves": [
                    {"site": "YA", "group": "A", "quantity": "8", "from": "out", "origin": None},
                    {"site": "YB", "group": "B", "quantity": "5", "from": "out", "origin": None},
                ],
                "passes": [],
                "shortages": [{"site": "YB", "group": "B", "quantity": "2"}],
                "prices": [
                    {"site": site, "side": side, "qualifier": name, "price": str(price)}
                    for site, side, name, price in prices
                ],
            }
        ],
    }
    return plan, certificate
