"""Which items share a limit, directly or through others, and whether their shortages add up.

Items that share a limit compete for it, and so their shortages are compared: in their unit, or in
the measure that the network names for it.
"""

from collections.abc import Iterable, Sequence
from typing import Final

import numpy as np

from service.network.columns import IntArray, Network
from service.network.faults import FaultList, pointer
from service.network.row_checks import MEASURE_ADVICE
from service.network.units import per_unit

UNITS_ADVICE: Final = (
    "Items in different units cannot be added up in unit. Say a measure that all of them have, "
    "such as weight_kg."
)


class Sharing:
    """Collects which items share limits; every limit joins its items to one circle."""

    def __init__(self, network: Network) -> None:
        """Start with every item by itself."""
        self._network = network
        self._leader = list(range(len(network.items)))

    def among(self, items: Iterable[int]) -> None:
        """Note that ``items`` share a limit."""
        first: int | None = None
        for item in items:
            if first is None:
                first = self._find(item)
            else:
                self._leader[self._find(item)] = first

    def on_lanes(self, rows: Sequence[IntArray], users: IntArray) -> None:
        """Note the items on lanes with limits for all items together.

        ``rows`` are the lanes with such limits that each item can use; ``users`` is how many items
        can use each lane of the network.
        """
        first = np.full(len(self._network.lanes), -1, np.int64)
        for item, own in enumerate(rows):
            used = own[users[own] > 1]
            for former in np.flatnonzero(np.bincount(first[used] + 1)).tolist():
                if former:
                    self.among((former - 1, item))
            first[used] = item

    def check(self, faults: FaultList) -> None:
        """Find items that share a limit although their shortages cannot be compared."""
        items = self._network.items
        measure = self._network.head.get("shortage_measure")
        circles: dict[int, list[int]] = {}
        for item in range(len(items)):
            circles.setdefault(self._find(item), []).append(item)
        place = pointer("shortage_measure")
        for circle in circles.values():
            if len(circle) == 1:
                continue
            if isinstance(measure, str):
                for item in circle:
                    if not per_unit(items[item], measure):
                        detail = f"{items[item].id} shares a limit with others. {MEASURE_ADVICE}"
                        faults.add(place, "measure_unknown", detail, measure)
            elif len({items[item].unit for item in circle}) > 1:
                names = ", ".join(items[item].id for item in circle[:3])
                detail = (
                    f"Items in different units share a limit ({names}). Say the measure in which "
                    "their shortages are compared, such as weight_kg."
                )
                faults.add(place, "shortage_measure_missing", detail)

    def _find(self, item: int) -> int:
        """Return the item that stands for the circle of ``item``."""
        while self._leader[item] != item:
            self._leader[item] = self._leader[self._leader[item]]
            item = self._leader[item]
        return item
