"""A small sound network as a client sends it, and the check of such documents in one call."""

import copy
import json
from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Any

from service.network.intake import IntakeReport, Limits, intake
from service.network.options import Options

SOUND: Mapping[str, Any] = {
    "format": 1,
    "name": "Evening cut-off",
    "currency": "EUR",
    "cut_off": "2026-02-03T16:00:00+01:00",
    "release_by": "2026-02-03T16:30:00+01:00",
    "items": [
        {
            "id": "ROAD-25",
            "name": "Road salt, 25 kg bag",
            "unit": "bag",
            "step": "1",
            "gtin": None,
            "weight_kg": "25.2",
            "volume_m3": "0.021",
            "packs": [{"unit": "pallet", "contains": "40"}],
            "tags": ["dry"],
        },
        {"id": "BRINE", "unit": "l", "step": "0.5", "weight_kg": 1.2},
    ],
    "sites": [
        {
            "id": "DEP-NORTH",
            "roles": ["warehouse"],
            "name": "North depot",
            "gln": None,
            "latitude": "61.2",
            "longitude": "8.4",
            "time_zone": "Europe/Oslo",
            "country": "NO",
            "handling_cost": "0.04",
            "tags": ["coast"],
        },
        {"id": "X", "roles": ["cross_dock"], "handling_cost": {"BRINE": "0.1"}},
        {"id": "Y", "roles": ["cross_dock", "warehouse"]},
        {"id": "YARD-07", "roles": ["ship_to"], "latitude": "60.9", "longitude": "8.9"},
    ],
    "supply": [
        {
            "site": "DEP-NORTH",
            "item": "ROAD-25",
            "quantity": "3200",
            "unit_cost": "0",
            "as_of": "2026-02-03T15:52:00+01:00",
            "on_hand": 3300,
            "reserved": 100,
            "keep": {"quantity": 10, "priority": 3},
        },
        {
            "site": "Y",
            "item": "BRINE",
            "quantity": "1.3",
            "unit": "m3",
            "as_of": "2026-02-03T15:55:00+01:00",
            "extra": {"b": "1", "a": "2"},
        },
    ],
    "demand": [
        {
            "reference": "SO-10077/1",
            "order": "SO-10077",
            "ordered_at": "2026-02-03T14:00:00Z",
            "site": "YARD-07",
            "item": "ROAD-25",
            "quantity": "880",
            "priority": 2,
            "tags": ["winter", "night"],
            "extra": {"route": "R7"},
        },
        {
            "site": "YARD-07",
            "item": "BRINE",
            "quantity": "2.5",
            "worth_at_most": "3",
            "origins": ["Y"],
        },
    ],
    "lanes": [
        {
            "id": "L1",
            "origin": "DEP-NORTH",
            "destination": "YARD-07",
            "item": "ROAD-25",
            "unit_cost": "0.215",
            "capacity": "2000",
            "carrier": "C-RAIL",
        },
        {
            "origin": "Y",
            "destination": "X",
            "unit_cost": 0.1,
            "capacity": 100,
            "per": "item",
            "measure": "weight_kg",
        },
        {"origin": "X", "destination": "YARD-07", "unit_cost": "0.1"},
        {"origin": "X", "destination": "YARD-07", "unit_cost": "0.2", "must_ship": 0},
    ],
    "rules": [
        {
            "rule": "throughput",
            "id": "dock",
            "sites": {"ids": ["X"]},
            "items": {"ids": ["BRINE"]},
            "flow": "received",
            "maximum": 100,
        },
        {"rule": "closure", "id": "spring", "lanes": {"ids": ["L1"]}, "from": "2026-03-01"},
    ],
    "control": {"demand_rows": 2, "demand_quantity": "882.5", "lane_rows": 4},
}


def sound() -> dict[str, Any]:
    """Return a sound network that a test may change."""
    return copy.deepcopy(dict(SOUND))


def check(
    document: object, folder: Path, options: Options | None = None, **header: str
) -> IntakeReport:
    """Run the input check on a document, or on bytes as they are; its output is in ``folder``."""
    folder.mkdir(parents=True, exist_ok=True)
    spool = folder / "spool"
    spool.write_bytes(document if isinstance(document, bytes) else json.dumps(document).encode())
    return intake(
        spool,
        folder,
        options=options or Options(),
        media_type=header.get("media_type", "application/json"),
        content_encoding=header.get("content_encoding"),
        limits=Limits(unpacked_bytes_max=1 << 24, nesting_max=16),
    )


def found(report: IntakeReport) -> list[tuple[str, str]]:
    """Return place and code of each fault."""
    return [(fault.pointer, fault.code) for fault in report.faults]


def found_after(change: Callable[[dict[str, Any]], None], folder: Path) -> list[tuple[str, str]]:
    """Return place and code of each fault of the sound network after a change."""
    document = sound()
    change(document)
    return found(check(document, folder))


def digest(document: dict[str, Any], folder: Path) -> str:
    """Return the digest of a sound network."""
    folder.mkdir(exist_ok=True)
    report = check(document, folder)
    assert report.summary is not None, found(report)
    return str(report.summary["network_digest"])


def doubted(report: IntakeReport) -> dict[str, Any]:
    """Return the cautions of an accepted network by their code."""
    assert report.summary is not None, report.faults
    cautions: Any = report.summary["cautions"]
    return {caution["code"]: caution for caution in cautions}
