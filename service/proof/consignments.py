"""Consignments: what is on each lane, over all items."""

from collections import defaultdict
from collections.abc import Mapping, Sequence
from fractions import Fraction
from typing import Any

import numpy as np

from service.network.columns import Item, Network
from service.network.naming import lane_names
from service.proof.flows import PlanLine
from service.proof.order_lines import Paths
from service.proof.results import ItemResult
from service.proof.shapes import amount
from service.proof.violations import Findings


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
    loads: defaultdict[int, list[tuple[Item, Fraction]]] = defaultdict(list)
    for result in results:
        for row, steps in result.on_lane.items():
            loads[row].append((network.items[result.item], steps * result.step))
    costs: defaultdict[int, Fraction] = defaultdict(Fraction)
    for line in lines:
        document = line.document
        costs[line.row] += amount(document["transport_cost"]) + amount(document["charges"])
    rows = sorted(loads)
    names = lane_names(network, np.array(rows, dtype=np.int64))
    expected = [
        (
            name,
            lanes.carrier.text(row),
            network.sites[int(lanes.origin[row])].id,
            network.sites[int(lanes.destination[row])].id,
            *_measures(loads[row]),
            costs[row],
            sorted(paths.references.get(row, ()), key=str.encode),
        )
        for row, name in zip(rows, names, strict=True)
    ]
    stated = [
        (
            *(entry[field] for field in ("lane", "carrier", "origin", "destination")),
            *(_known(entry[field]) for field in ("pallets", "weight_kg", "volume_m3")),
            amount(entry["cost"]),
            entry["order_references"],
        )
        for entry in documents
    ]
    if len(stated) != len(expected):
        findings.add("consignment_wrong", "not the lanes in use", place="/consignments")
    for position, (said, right) in enumerate(zip(stated, expected, strict=False)):
        if said != right:
            place = f"/consignments/{position}"
            findings.add("consignment_wrong", "not what is on its lane", place=place)


def _known(text: str) -> Fraction | None:
    """Return a measure, None where it is not known."""
    return None if text == "unknown" else amount(text)


def _measures(load: Sequence[tuple[Item, Fraction]]) -> tuple[Fraction | None, ...]:
    """Return pallets, weight and volume of a load, None where an item of it does not say."""
    pallets = [
        next((1 / pack.contains for pack in item.packs if pack.unit == "pallet"), None)
        for item, _ in load
    ]
    weights = [item.weight_kg for item, _ in load]
    volumes = [item.volume_m3 for item, _ in load]
    return tuple(_sum(load, per_unit) for per_unit in (pallets, weights, volumes))


def _sum(
    load: Sequence[tuple[Item, Fraction]], per_unit: Sequence[Fraction | None]
) -> Fraction | None:
    """Return the sum of quantity times ``per_unit``, None where one of them is."""
    total = Fraction(0)
    for (_, quantity), per in zip(load, per_unit, strict=True):
        if per is None:
            return None
        total += quantity * per
    return total
