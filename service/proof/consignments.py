"""Consignments: what is on each lane, over all items."""

from collections import defaultdict
from collections.abc import Iterator, Mapping, Sequence
from fractions import Fraction
from typing import Any

import numpy as np

from service.network.columns import Item, Network
from service.proof.bills import due_bills, stated_bills
from service.proof.calendar import Calendar
from service.proof.flows import PlanLine
from service.proof.numbers import numbers, numbers_of, together
from service.proof.order_lines import Paths
from service.proof.results import ItemResult
from service.proof.violations import Findings

UNKNOWN = "unknown"
_MONEY = ("transport_cost", "charges")
_FIELDS = ("pallets", "weight_kg", "volume_m3")


def check_consignments(  # noqa: PLR0913 - a consignment repeats something of everything
    calendar: Calendar,
    results: Sequence[ItemResult],
    lines: Sequence[PlanLine],
    paths: Paths,
    documents: Sequence[Mapping[str, Any]],
    *,
    findings: Findings,
) -> None:
    """Note when consignments are not what plan lines put on each lane, in the lanes' order."""
    network = calendar.network
    lanes = network.lanes
    loads: dict[int, list[tuple[int, int]]] = {}
    for result in results:
        for row, steps in result.on_lane.items():
            loads.setdefault(row, []).append((result.item, steps))
    money, below = together(
        *(numbers([line.document[field] for line in lines]) for field in _MONEY)
    )
    costs: defaultdict[int, int] = defaultdict(int)
    for line, *parts in zip(lines, *money, strict=True):
        costs[line.row] += sum(parts)
    rows = sorted(loads)
    if len(documents) != len(rows):
        findings.add("consignment_wrong", "not the lanes in use", place="/consignments")
    at = np.array(rows, dtype=np.int64)
    names = np.array([site.id for site in network.sites], dtype=object)
    carriers = np.array([*lanes.carrier.values, None], dtype=object)
    stated = numbers([entry["cost"] for entry in documents])
    # What is stated beside what should be, a column at a time: most are right as a whole.
    columns: list[tuple[list[Any], list[Any]]] = [
        ([entry["lane"] for entry in documents], calendar.names(at)),
        (
            [calendar.is_dated(entry, row) for entry, row in zip(documents, rows, strict=False)],
            [True] * min(len(documents), len(rows)),
        ),
        ([entry["carrier"] for entry in documents], carriers[lanes.carrier.codes[at]].tolist()),
        ([entry["origin"] for entry in documents], names[lanes.origin[at]].tolist()),
        ([entry["destination"] for entry in documents], names[lanes.destination[at]].tolist()),
        (
            [entry["order_references"] for entry in documents],
            # Characters sort as their UTF-8 bytes do.
            [sorted(paths.references.get(row, ())) for row in rows],
        ),
        (
            [cost * below for cost in stated.whole],
            [costs[row] * stated.below for row in rows],
        ),
        (stated_bills(documents), due_bills(network, rows, [loads[row] for row in rows])),
        *_measures(network, documents, [loads[row] for row in rows]),
    ]
    wrong = {position for column in columns for position in _differing(*column)}
    for position in sorted(wrong):
        place = f"/consignments/{position}"
        findings.add("consignment_wrong", "not what is on its lane", place=place)


def _differing(stated: Sequence[object], expected: Sequence[object]) -> list[int]:
    """Return the positions of what is in both columns and differs."""
    if stated == expected:
        return []
    pairs = enumerate(zip(stated, expected, strict=False))
    return [position for position, (said, should) in pairs if said != should]


def _measures(
    network: Network,
    documents: Sequence[Mapping[str, Any]],
    loads: Sequence[Sequence[tuple[int, int]]],
) -> Iterator[tuple[list[int | None], list[int | None]]]:
    """Yield pallets, weight and volume as stated, and as each load (steps by item) has them."""
    items = network.items
    of_units = (
        [_pallets(item) for item in items],
        [item.weight_kg for item in items],
        [item.volume_m3 for item in items],
    )
    for field, of_unit in zip(_FIELDS, of_units, strict=True):
        stated, below = _known([entry[field] for entry in documents])
        of_step, below_step = _of_step(of_unit, network)
        has = [_total(of_step, load) for load in loads]
        yield (
            [None if said is None else said * below_step for said in stated],
            [None if total is None else total * below for total in has],
        )


def _total(of_step: Sequence[int | None], load: Sequence[tuple[int, int]]) -> int | None:
    """Return what a load comes to, None where an item of it does not say."""
    total = 0
    for item, steps in load:
        per = of_step[item]
        if per is None:
            return None
        total += steps * per
    return total


def _of_step(per_unit: Sequence[Fraction | None], network: Network) -> tuple[list[int | None], int]:
    """Return a measure of one step of each item over a denominator, None where it is not known."""
    known = numbers_of(
        per * item.step
        for per, item in zip(per_unit, network.items, strict=True)
        if per is not None
    )
    each = iter(known.whole)
    return [None if per is None else next(each) for per in per_unit], known.below


def _known(texts: Sequence[str]) -> tuple[list[int | None], int]:
    """Return measures over a denominator, None where one is not known."""
    known = numbers([text for text in texts if text != UNKNOWN])
    each = iter(known.whole)
    return [None if text == UNKNOWN else next(each) for text in texts], known.below


def _pallets(item: Item) -> Fraction | None:
    """Return how much of a pallet one unit is, None where the item has no pallet."""
    return next((1 / pack.contains for pack in item.packs if pack.unit == "pallet"), None)
