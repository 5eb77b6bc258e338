"""All goods on one lane together: what a carrier is told."""

from collections.abc import Mapping, Sequence
from fractions import Fraction
from typing import NamedTuple

from service.network.columns import Network
from service.planning.documents.amounts import UNKNOWN, Measured, pallets_per_unit, text, texts
from service.planning.documents.plan_lines import ItemPlan, PlanLine
from service.planning.documents.shipments import Shipments


class _OnLane(NamedTuple):
    """The goods of one item on one lane: its plan line, and its measures as text."""

    item: int
    line: PlanLine
    pallets: str
    weight: str
    volume: str
    cost: str


def consignments(
    network: Network,
    plans: Sequence[ItemPlan],
    scale: Fraction,
    *,
    references: Mapping[tuple[int, int], set[bytes]],
) -> list[dict[str, object]]:
    """Return the table ``consignments``: one row for each lane in use and day that it departs.

    They are in the lanes' order. ``references`` are the order lines with goods on each lane, by its
    row in the network and the day (0 without dates).
    Pallets, weight and volume are ``unknown`` where an item on the lane lacks the figure.
    """
    by_lane: dict[tuple[int, int], list[_OnLane]] = {}
    for plan in plans:
        for goods in _goods(network, plan, scale):
            by_lane.setdefault((goods.line.row, goods.line.departs), []).append(goods)
    sites = [site.id for site in network.sites]
    shipments = Shipments(network)
    rows: list[dict[str, object]] = []
    for (row, day), own in sorted(by_lane.items()):
        first = own[0] if len(own) == 1 else _together(network, own, scale)
        rows.append(
            {
                "lane": first.line.lane,
                "carrier": network.lanes.carrier.text(row),
                "origin": sites[first.line.origin],
                "destination": sites[first.line.destination],
                **(first.line.dates() if day else {}),
                "pallets": first.pallets,
                "weight_kg": first.weight,
                "volume_m3": first.volume,
                "cost": first.cost,
                "order_references": [
                    reference.decode() for reference in sorted(references.get((row, day), ()))
                ],
            }
        )
        tariff = shipments.tariff(row, day)
        if tariff is not None:
            together = [(goods.item, goods.line.steps) for goods in own]
            rows[-1]["freight"] = shipments.document(tariff, together)
    return rows


def _goods(network: Network, plan: ItemPlan, scale: Fraction) -> list[_OnLane]:
    """Return the goods of one item by lane."""
    number = plan.solved.own.item
    item = network.items[number]
    lines = [line for line in plan.lines if line.row >= 0]
    steps = [line.steps for line in lines]

    def measured(per_unit: Fraction | None) -> list[str]:
        if per_unit is None:
            return [UNKNOWN] * len(steps)
        return texts(steps, item.step * per_unit)

    return [
        _OnLane(number, line, pallets, weight, volume, cost)
        for line, pallets, weight, volume, cost in zip(
            lines,
            measured(pallets_per_unit(item)),
            measured(item.weight_kg),
            measured(item.volume_m3),
            texts([line.transport + line.charges for line in lines], 1 / scale),
            strict=True,
        )
    ]


def _together(network: Network, own: Sequence[_OnLane], scale: Fraction) -> _OnLane:
    """Return the goods of several items on one lane as one."""
    pallets, weight, volume = Measured(), Measured(), Measured()
    for goods in own:
        item = network.items[goods.item]
        quantity = goods.line.steps * item.step
        pallets = pallets.plus(quantity, pallets_per_unit(item))
        weight = weight.plus(quantity, item.weight_kg)
        volume = volume.plus(quantity, item.volume_m3)
    return _OnLane(
        item=own[0].item,
        line=own[0].line,
        pallets=pallets.text,
        weight=weight.text,
        volume=volume.text,
        cost=text(sum(goods.line.transport + goods.line.charges for goods in own) / scale),
    )
