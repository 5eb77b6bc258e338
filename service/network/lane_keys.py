"""One number for the ends and the item of a lane, by which lanes are sorted and found."""

from typing import Any

import numpy as np
from numpy.typing import NDArray

from service.network.columns import IntArray, LaneTable

Codes = NDArray[np.integer[Any]]

_ROOM = 2**63


class LaneKeys:
    """Numbers that sort as (origin, destination, item) do; ``keys`` are those of all lanes."""

    def __init__(self, lanes: LaneTable) -> None:
        """Give every lane of a table its number."""
        self._columns = (lanes.origin, lanes.destination, lanes.item)
        self._least = [int(column.min(initial=0)) for column in self._columns]
        self._most = [int(column.max(initial=0)) for column in self._columns]
        self._widths = [
            most - least + 1 for least, most in zip(self._least, self._most, strict=True)
        ]
        self._pairs: IntArray | None = None
        if self._widths[0] * self._widths[1] * self._widths[2] >= _ROOM:
            # Three codes of 31 bits would leave 64: the rank of each pair of ends does not.
            self._pairs = np.unique(self._ends(lanes.origin, lanes.destination))
        self.keys = self._keys(*self._columns)

    def _keys(self, origin: Codes, destination: Codes, item: Codes) -> IntArray:
        """Return the key of each kind of lane; ends that no lane has share that of others."""
        ends = self._ends(origin, destination)
        if self._pairs is not None:
            ends = np.searchsorted(self._pairs, ends)
        # In place: to ask for eight more bytes a lane takes as long as to add them up.
        ends *= self._widths[2]
        ends += item
        ends -= self._least[2]
        return ends

    def _ends(self, origin: Codes, destination: Codes) -> IntArray:
        """Return a number for each pair of ends."""
        ends = origin.astype(np.int64)
        ends -= self._least[0]
        ends *= self._widths[1]
        ends += destination
        ends -= self._least[1]
        return ends


def first_rows(lanes: LaneTable, origin: Codes, destination: Codes, item: Codes) -> IntArray:
    """Return the first row of each kind of lane, -1 where there is none.

    ``lanes`` are sorted by origin, destination and item. All searches halve side by side, which
    reads a few rows for each, where keys would be made for a million to find some thousand.
    """
    columns = (lanes.origin, lanes.destination, lanes.item)
    low, high = np.zeros(len(origin), np.int64), np.full(len(origin), len(lanes))
    while (low < high).any():
        middle = (low + high) // 2
        at = np.minimum(middle, len(lanes) - 1)
        before = np.zeros(len(origin), np.bool_)
        same = low < high
        for column, wanted in zip(columns, (origin, destination, item), strict=True):
            there = column[at]
            before |= same & (there < wanted)
            same &= there == wanted
        high = np.where(before, high, middle)
        low = np.where(before, middle + 1, low)
    found = low < len(lanes)
    for column, wanted in zip(columns, (origin, destination, item), strict=True):
        found[found] = column[low[found]] == wanted[found]
    return np.where(found, low, -1)
