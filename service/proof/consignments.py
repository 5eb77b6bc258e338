"""Consignments: what is on each lane, over all items."""

from collections import defaultdict
from collections.abc import Mapping, Sequence
from fractions import Fraction
from typing import Any

import numpy as np

from service.network.columns import Item, Network
from service.network.naming import lane_names
from service.proof.flows import PlanLine
from service.proof.numbers import numbers, numbers_of, together
from service.proof.order_lines import Paths
from service.proof.results import ItemResult, lane_ends
from service.proof.violations import Findings

UNKNOWN = "unknown"
_MONEY = ("transport_cost", "charges")
_FIELDS = ("pallets", "weight_kg", "volume_m3")


def check_consignments(  # noqa: PLR0913 - a consignment repeats something of everything
    network: Network,
    results: Sequence[ItemResult],
    lines: Sequence[PlanLine],
    paths: Paths,
    documents: Sequence[Mapping[str, Any]],
    *,
    findings: Findings,
) -> None:
    """Note when consignments are not what plan lines put on each lane, in the lanes' order."""
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
    ends = lane_ends(network, at)
    measures = _Measures(network, documents)
    stated = numbers([entry["cost"] for entry in documents])
    columns = zip(
        documents,
        stated.whole,
        rows,
        lane_names(network, at),
        lanes.carrier.codes[at].tolist(),
        strict=False,
    )
    for position, (entry, cost, row, name, carrier) in enumerate(columns):
        origin, destination = ends[row]
        references = paths.references.get(row, set())
        if (
            entry["lane"] != name
            or entry["carrier"] != (None if carrier < 0 else lanes.carrier.values[carrier])
            or entry["origin"] != network.sites[origin].id
            or entry["destination"] != network.sites[destination].id
            or not measures.are_right(position, loads[row])
            or cost * below != costs[row] * stated.below
            # Characters sort as their UTF-8 bytes do.
            or entry["order_references"] != sorted(references)
        ):
            place = f"/consignments/{position}"
            findings.add("consignment_wrong", "not what is on its lane", place=place)


class _Measures:
    """Compares pallets, weight and volume as stated with what a load has."""

    def __init__(self, network: Network, documents: Sequence[Mapping[str, Any]]) -> None:
        """Read what is stated, and what a step of each item has."""
        self._stated = [_known([entry[field] for entry in documents]) for field in _FIELDS]
        self._of_step = [
            _of_step([_pallets(item) for item in network.items], network),
            _of_step([item.weight_kg for item in network.items], network),
            _of_step([item.volume_m3 for item in network.items], network),
        ]

    def are_right(self, position: int, load: Sequence[tuple[int, int]]) -> bool:
        """Return whether one row states what ``load``, steps by item, comes to."""
        for (stated, below), (of_step, below_step) in zip(self._stated, self._of_step, strict=True):
            said, has = stated[position], _total(of_step, load)
            if said is None or has is None:
                if said is not None or has is not None:
                    return False
            elif said * below_step != has * below:
                return False
        return True


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
