"""All goods on one lane together: what a carrier is told."""

from collections.abc import Iterable, Mapping
from fractions import Fraction

from service.network.columns import Network
from service.planning.amounts import Measured, pallets_per_unit, text
from service.planning.plan_lines import PlanLine


def consignments(
    network: Network, lines: Iterable[PlanLine], *, references: Mapping[int, set[bytes]]
) -> list[dict[str, object]]:
    """Return the table ``consignments``: one row for each lane in use, in the lanes' order.

    ``references`` are the order lines with goods on each lane, by its row in the network.
    Pallets, weight and volume are ``unknown`` where an item on the lane lacks the figure.
    """
    by_lane: dict[int, list[PlanLine]] = {}
    for line in lines:
        if line.row >= 0:
            by_lane.setdefault(line.row, []).append(line)
    rows: list[dict[str, object]] = []
    for row, own in sorted(by_lane.items()):
        pallets, weight, volume = Measured(), Measured(), Measured()
        cost = Fraction(0)
        for line in own:
            item = network.items[line.item]
            pallets = pallets.plus(line.quantity, pallets_per_unit(item))
            weight = weight.plus(line.quantity, item.weight_kg)
            volume = volume.plus(line.quantity, item.volume_m3)
            cost += line.transport
        rows.append(
            {
                "lane": own[0].lane,
                "carrier": network.lanes.carrier.text(row),
                "origin": network.sites[own[0].origin].id,
                "destination": network.sites[own[0].destination].id,
                "pallets": pallets.text,
                "weight_kg": weight.text,
                "volume_m3": volume.text,
                "cost": text(cost),
                "order_references": [
                    reference.decode() for reference in sorted(references.get(row, ()))
                ],
            }
        )
    return rows
