"""The demo network: an invented salt producer on an invented island, the evening before snow.

No place, company, product or price in it exists; the island lies where maps show open sea. Every
number comes from whole-number arithmetic, so each machine plans the same network to the same plan.
"""

from collections.abc import Mapping, Sequence
from math import isqrt

import orjson

CUT_OFF = "2026-02-03T16:00:00+01:00"
STOCK_TAKEN = "2026-02-03T15:40:00+01:00"

# Places on the island's own grid, in kilometres east and north of its south-west corner.
_DEPOTS: Mapping[str, tuple[str, int, int]] = {
    "DEP-OSKMERE": ("Oskmere works", 24, 30),
    "DEP-TARNUVIK": ("Tarnuvik harbour", 142, 18),
    "DEP-VELQUAR": ("Velquar shaft", 88, 96),
    "DEP-HESTRUL": ("Hestrul siding", 30, 150),
    "DEP-BRANDOVE": ("Brandove store", 150, 132),
}
_CROSS_DOCKS: Mapping[str, tuple[str, int, int]] = {
    "DOCK-MIDMOOR": ("Midmoor yard tracks", 84, 52),
    "DOCK-FELLGATE": ("Fellgate sheds", 96, 140),
}
_YARD_COUNT = 40
_YARD_HEADS = ("Alv", "Brun", "Corm", "Drosk", "Esk", "Furl", "Gann", "Hov")
_YARD_TAILS = ("uvel", "ombra", "iskar", "athule", "equor")

_BAG, _SACK, _GRIT, _TABLETS = "ROAD-25", "ROAD-SACK", "GRIT-10", "SOFT-15"

# Stock: depot, item, quantity, unit cost, lot. The works dig cheaply, the stores buy in.
_STOCK: Sequence[tuple[str, str, str, str, str | None]] = (
    ("DEP-OSKMERE", _BAG, "6200", "1.85", "OSK-0126"),
    ("DEP-OSKMERE", _BAG, "2400", "1.85", "OSK-0131"),
    ("DEP-OSKMERE", _SACK, "640.5", "31.4", None),
    ("DEP-OSKMERE", _GRIT, "5200", "1.1", None),
    ("DEP-TARNUVIK", _BAG, "4100", "2.05", None),
    ("DEP-TARNUVIK", _SACK, "300", "34.9", None),
    ("DEP-TARNUVIK", _TABLETS, "3900", "3.2", None),
    ("DEP-VELQUAR", _BAG, "7300", "1.78", "VEL-0202"),
    ("DEP-VELQUAR", _SACK, "820", "29.75", None),
    ("DEP-VELQUAR", _GRIT, "2600", "1.04", None),
    ("DEP-HESTRUL", _BAG, "2900", "2.1", None),
    ("DEP-HESTRUL", _GRIT, "3300", "1.22", None),
    ("DEP-HESTRUL", _TABLETS, "2500", "3.35", None),
    ("DEP-BRANDOVE", _BAG, "3400", "2.02", None),
    ("DEP-BRANDOVE", _SACK, "410", "33.2", None),
    ("DEP-BRANDOVE", _TABLETS, "1800", "3.3", None),
)


class _Numbers:
    """A stream of whole numbers that is the same everywhere.

    The recurrence is the example of the C standard (ISO/IEC 9899:1999, 7.20.2.2), of which the
    upper bits are taken.
    """

    def __init__(self, seed: int) -> None:
        self._state = seed

    def below(self, bound: int) -> int:
        """Return the next number from 0 to ``bound`` - 1."""
        self._state = (self._state * 1_103_515_245 + 12_345) % 2**31
        return (self._state >> 12) % bound


def demo_network() -> dict[str, object]:
    """Return the demo network in the form that a client sends."""
    numbers = _Numbers(250_203)
    yards = _yards(numbers)
    demand = _demand(numbers, yards)
    return {
        "format": 1,
        "name": "Northern isle, snow expected",
        "currency": "EUR",
        "cut_off": CUT_OFF,
        "release_by": "2026-02-03T16:30:00+01:00",
        "items": _items(),
        "sites": _sites(yards),
        "supply": _supply(),
        "demand": demand,
        "lanes": _lanes(yards),
        "rules": _rules(yards),
        "control": {"demand_rows": len(demand), "supply_rows": len(_STOCK)},
    }


def demo_bytes() -> bytes:
    """Return the demo network as the bytes of a request."""
    return orjson.dumps(demo_network())


def _items() -> list[dict[str, object]]:
    """Return the four things the producer sells."""
    return [
        {
            "id": _BAG,
            "name": "Road salt, 25 kg bag",
            "unit": "bag",
            "weight_kg": "25.2",
            "volume_m3": "0.021",
            "packs": [{"unit": "pallet", "contains": "40"}],
        },
        {
            "id": _SACK,
            "name": "Road salt, sacks of half a tonne",
            "unit": "tonne",
            "step": "0.5",
            "weight_kg": "1004",
            "volume_m3": "0.82",
            "packs": [{"unit": "pallet", "contains": "1"}],
        },
        {
            "id": _GRIT,
            "name": "Salted grit, 10 kg bag",
            "unit": "bag",
            "weight_kg": "10.1",
            "volume_m3": "0.0072",
            "packs": [{"unit": "pallet", "contains": "90"}],
        },
        {
            "id": _TABLETS,
            "name": "Softening tablets, 15 kg bag",
            "unit": "bag",
            "weight_kg": "15.15",
            "volume_m3": "0.0164",
            "packs": [
                {"unit": "layer", "contains": "8"},
                {"unit": "pallet", "contains": "64"},
            ],
        },
    ]


def _yards(numbers: _Numbers) -> dict[str, tuple[str, int, int]]:
    """Return the yards by id: a name and a place, spread over the whole island."""
    yards: dict[str, tuple[str, int, int]] = {}
    for number in range(_YARD_COUNT):
        head = _YARD_HEADS[number % len(_YARD_HEADS)]
        tail = _YARD_TAILS[number // len(_YARD_HEADS)]
        east = 8 + 22 * (number % 8) + numbers.below(18)
        north = 8 + 33 * (number // 8) + numbers.below(26)
        yards[f"YARD-{number + 1:02}"] = (head + tail, east, north)
    return yards


def _sites(yards: Mapping[str, tuple[str, int, int]]) -> list[dict[str, object]]:
    """Return all places with what it costs to pass goods through them."""
    sites: list[dict[str, object]] = []
    for depot, (name, east, north) in _DEPOTS.items():
        handling = {_BAG: "0.06", _SACK: "1.15", _GRIT: "0.04", _TABLETS: "0.05"}
        sites.append(_site(depot, "warehouse", name, east, north) | {"handling_cost": handling})
    for dock, (name, east, north) in _CROSS_DOCKS.items():
        handling = {_BAG: "0.03", _SACK: "0.6", _GRIT: "0.02", _TABLETS: "0.03"}
        sites.append(_site(dock, "cross_dock", name, east, north) | {"handling_cost": handling})
    sites.extend(_site(yard, "ship_to", *place) for yard, place in yards.items())
    return sites


def _site(identity: str, role: str, name: str, east: int, north: int) -> dict[str, object]:
    """Return one place; a kilometre is taken as 0.01 degrees, close enough for a picture."""
    return {
        "id": identity,
        "roles": [role],
        "name": name,
        "latitude": f"{51 + north // 100}.{north % 100:02}",
        "longitude": f"-{(3600 - east) // 100}.{(3600 - east) % 100:02}",
    }


def _supply() -> list[dict[str, object]]:
    """Return the stock; the shaft keeps some bags back for its own roads."""
    rows: list[dict[str, object]] = []
    for site, item, quantity, unit_cost, lot in _STOCK:
        row: dict[str, object] = {
            "site": site,
            "item": item,
            "quantity": quantity,
            "unit_cost": unit_cost,
            "as_of": STOCK_TAKEN,
        }
        if lot is not None:
            row["lot"] = lot
        if (site, item) == ("DEP-VELQUAR", _BAG):
            row["keep"] = {"quantity": "480", "priority": 3}
        rows.append(row)
    return rows


def _demand(
    numbers: _Numbers, yards: Mapping[str, tuple[str, int, int]]
) -> list[dict[str, object]]:
    """Return about 300 order lines: more bags of road salt than there are, enough of the rest."""
    rows: list[dict[str, object]] = []
    for number, yard in enumerate(yards):
        for order in range(2 + numbers.below(2)):
            order_id = f"SO-{40_100 + 10 * number + order}"
            # The motorway yards and the hospitals' suppliers come before towns and trade.
            priority = (1, 2, 2, 3, 3, 4, 5, 5)[numbers.below(8)]
            hour, minute = 7 + numbers.below(7), numbers.below(60)
            items = [_BAG, _BAG, _SACK, _GRIT, _TABLETS][: 1 + numbers.below(5)]
            for line, item in enumerate(items, start=1):
                row: dict[str, object] = {
                    "reference": f"{order_id}/{line}",
                    "order": order_id,
                    "ordered_at": f"2026-02-03T{hour:02}:{minute:02}:00Z",
                    "site": yard,
                    "item": item,
                    "priority": priority,
                    "extra": {"route": f"R{1 + number % 9}"},
                }
                rows.append(row | _wanted(numbers, item, line))
    # Three shops take tablets only while they cost little to bring: they compete in money.
    rows.extend(
        {
            "reference": f"SHOP-{yard[-2:]}",
            "site": yard,
            "item": _TABLETS,
            "quantity": "96",
            "worth_at_most": "3.6",
        }
        for yard in ("YARD-01", "YARD-20", "YARD-40")
    )
    return rows


def _wanted(numbers: _Numbers, item: str, line: int) -> dict[str, object]:
    """Return quantity and unit of one order line; some orders are written in pallets."""
    if item == _SACK:
        return {"quantity": f"{6 + numbers.below(30)}.{(0, 5)[numbers.below(2)]}"}
    if item == _BAG and line == 2:
        return {"quantity": str(1 + numbers.below(5)), "unit": "pallet"}
    if item == _BAG:
        return {"quantity": str(40 + 20 * numbers.below(16))}
    return {"quantity": str(16 + 8 * numbers.below(20))}


def _lanes(yards: Mapping[str, tuple[str, int, int]]) -> list[dict[str, object]]:
    """Return roads to near yards, rails to the docks, and the docks' roads onward.

    Rates are money per kilogram, for freight is weighed; limits on a lane hold for each item.
    """
    lanes: list[dict[str, object]] = []
    for depot, (_, *place) in _DEPOTS.items():
        for dock, (_, *dock_place) in _CROSS_DOCKS.items():
            kilometres = _kilometres(place, dock_place)
            lanes.append(
                _lane(depot, dock, 4_000 + 48 * kilometres, "Isle Rail")
                | {"capacity": "60000", "per": "item"}
            )
    for yard, (_, *place) in yards.items():
        by_distance = sorted(
            (_kilometres(place, depot_place), depot) for depot, (_, *depot_place) in _DEPOTS.items()
        )
        for rank, (kilometres, depot) in enumerate(by_distance[:3]):
            lane = _lane(depot, yard, 9_000 + 210 * kilometres, "Gorse Haulage")
            # The nearest depot's own lorries are few: what they cannot take comes from further on.
            lanes.append(lane | {"capacity": "24000", "per": "item"} if rank == 0 else lane)
        for dock, (_, *dock_place) in _CROSS_DOCKS.items():
            kilometres = _kilometres(place, dock_place)
            if kilometres <= 90:
                lanes.append(_lane(dock, yard, 8_000 + 190 * kilometres, "Petrel Freight"))
    return lanes


def _lane(origin: str, destination: str, micro_euros: int, carrier: str) -> dict[str, object]:
    """Return a lane for any item at ``micro_euros`` a kilogram."""
    return {
        "id": f"{origin.partition('-')[2]}:{destination.partition('-')[2]}",
        "origin": origin,
        "destination": destination,
        "measure": "weight_kg",
        "unit_cost": f"0.{micro_euros:06}",
        "carrier": carrier,
    }


def _kilometres(one: Sequence[int], other: Sequence[int]) -> int:
    """Return the distance of two places, rounded down."""
    return isqrt((one[0] - other[0]) ** 2 + (one[1] - other[1]) ** 2)


def _rules(yards: Mapping[str, tuple[str, int, int]]) -> list[dict[str, object]]:
    """Return the two rules of the day: a road is blocked, and a dock is short of hands."""
    nearest = min(yards, key=lambda yard: _kilometres(yards[yard][1:], _DEPOTS["DEP-VELQUAR"][1:]))
    return [
        {
            "rule": "closure",
            "id": "SLIDE",
            "note": "The road below the shaft is under snow",
            "owner": "road office",
            "from": "2026-02-02",
            "until": "2026-02-05",
            "lanes": {"origin": ["DEP-VELQUAR"], "destination": [nearest]},
        },
        {
            "rule": "throughput",
            "id": "NIGHT-CREW",
            "note": "Half the crew of the Midmoor dock is ill",
            "owner": "dock office",
            "sites": {"ids": ["DOCK-MIDMOOR"]},
            "flow": "through",
            "measure": "unit",
            "maximum": "1600",
            "per": "each",
            "items": {"ids": [_BAG]},
        },
    ]
