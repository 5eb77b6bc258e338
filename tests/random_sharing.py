"""Random networks whose items share limits that bind: drawn around a plan made without them."""

from collections.abc import Mapping
from fractions import Fraction
from math import ceil
from random import Random
from typing import Any

from tests.factories import Document, Planned, plan_network
from tests.oracle_reading import exact, per_unit
from tests.random_networks import RandomNetwork, draw_network

MEASURES = ("weight_kg", "volume_m3")


def draw_sharing(rng: Random, *, sites: int = 3, walks: int = 5) -> RandomNetwork:
    """Draw a network and limits over several items that its own plan would often break."""
    drawn = draw_network(rng, sites=sites, walks=walks)
    document, options = drawn.document, dict(drawn.options)
    free = plan_network(document, **options)
    document = {**document, "shortage_measure": "weight_kg"}
    document["lanes"] = [dict(lane) for lane in document["lanes"]]
    document["rules"] = [dict(rule) for rule in document["rules"]]
    moved = _moved(document, free)
    _share_lanes(document, moved, rng)
    for number in range(rng.randint(1, 3)):
        _add_rule(document, moved, rng, number)
    return RandomNetwork(document=document, options=options, scarce=drawn.scarce)


Moved = dict[tuple[str, str, str], Fraction]


def _moved(document: Document, free: Planned) -> Moved:
    """Return what moves between two sites, by item."""
    del document
    found: Moved = {}
    for line in free.plan["plan_lines"]:
        if line["lane"] is not None:
            key = line["origin"], line["destination"], line["item"]
            found[key] = found.get(key, Fraction(0)) + exact(line["quantity"])
    return found


def _room(rng: Random, measured: Fraction, *, step: Fraction) -> str:
    """Return a limit around what is moved, mostly below it."""
    part = rng.choice(
        [Fraction(1, 2), Fraction(3, 4), Fraction(9, 10), Fraction(1), Fraction(5, 4)]
    )
    return _plain(measured, part, step)


def _plain(measured: Fraction, part: Fraction, step: Fraction) -> str:
    """Return a part of a quantity, or of a step where nothing moves, with three decimals."""
    thousandths = ceil(max(measured, 3 * step) * part * 1000)
    return f"{thousandths // 1000}.{thousandths % 1000:03d}"


def _measured(document: Document, moved: Mapping[Any, Fraction], measure: str) -> Fraction:
    """Return what all that moves comes to in a measure."""
    items = {item["id"]: item for item in document["items"]}
    return sum(
        (quantity * per_unit(items[key[2]], measure) for key, quantity in moved.items()),
        Fraction(0),
    )


def _share_lanes(document: Document, moved: Moved, rng: Random) -> None:
    """Let some lanes for any item have a capacity for all of them together."""
    for lane in document["lanes"]:
        if "item" in lane or rng.random() < 0.5:
            continue
        for field in ("capacity", "must_ship"):
            lane.pop(field, None)
        measure = rng.choice(MEASURES)
        items = {item["id"]: item for item in document["items"]}
        rate = exact(lane["unit_cost"])
        own = {
            key: quantity
            for key, quantity in moved.items()
            if key[:2] == (lane["origin"], lane["destination"])
        }
        lane |= {
            "measure": measure,
            "capacity": _room(rng, _measured(document, own, measure), step=_step(items, measure)),
            "per": "together",
            "unit_cost": str(abs(rate)) if rate.denominator == 1 else lane["unit_cost"].lstrip("-"),
        }


def _step(items: Mapping[str, Document], measure: str) -> Fraction:
    """Return the largest step of any item in a measure."""
    return max(per_unit(item, measure) * exact(item.get("step", "1")) for item in items.values())


def _add_rule(document: Document, moved: Moved, rng: Random, number: int) -> None:
    """Add a rule over several lanes, sites or items."""
    measure = rng.choice(MEASURES)
    items = {item["id"]: item for item in document["items"]}
    rule: dict[str, Any] = {"id": f"S{number}", "measure": measure}
    if rng.random() < 0.3:
        picked = rng.sample(sorted(items), rng.randint(1, len(items)))
        rule["items"] = {"ids": picked}
    counted = {
        key: quantity
        for key, quantity in moved.items()
        if "items" not in rule or key[2] in rule["items"]["ids"]
    }
    sites = [site["id"] for site in document["sites"]]
    if rng.random() < 0.5 or not document["lanes"]:
        flow = rng.choice(["received", "sent", "through"])
        chosen = rng.sample(sites, rng.randint(1, 2))
        end = 0 if flow == "sent" else 1
        counted = {key: q for key, q in counted.items() if key[end] in chosen}
        rule |= {"rule": "throughput", "sites": {"ids": sorted(chosen)}, "flow": flow}
    else:
        lane = rng.choice(document["lanes"])
        end_name = rng.choice(["origin", "destination"])
        counted = {
            key: q
            for key, q in counted.items()
            if key[0 if end_name == "origin" else 1] == lane[end_name]
        }
        rule |= {"rule": "shared_capacity", "lanes": {end_name: [lane[end_name]]}}
    rule["per"] = rng.choice(["each", "together"])
    rule["maximum"] = _room(rng, _measured(document, counted, measure), step=_step(items, measure))
    document["rules"].append(rule)
