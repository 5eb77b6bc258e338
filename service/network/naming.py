"""Names of lanes: the id as given, else ``ORIGIN>DESTINATION[>ITEM]``, then ``#2``, ``#3``.

Lanes without an id that share origin, destination and item are numbered in the order of the normal
form (carrier, unit cost, must-ship, capacity, tags), so that a name never depends on the order in
which lanes were sent. ``>``, ``#`` and ``%`` inside ids are percent-encoded.
"""

from collections.abc import Iterable, Sequence

import numpy as np

from service.network.columns import IntArray, LaneTable, Network

_ENCODED = str.maketrans({"%": "%25", ">": "%3E", "#": "%23"})


def encoded(identifier: str) -> str:
    """Return an id as it stands inside a name."""
    return identifier.translate(_ENCODED)


def base_names(network: Network, rows: IntArray) -> list[str]:
    """Return, for each lane of ``rows``, the name of the first lane without an id on its way."""
    lanes = network.lanes
    sites = [encoded(site.id) for site in network.sites]
    items = [">" + encoded(item.id) for item in network.items]
    items.append("")  # position -1: a lane that carries any item
    return [
        f"{sites[origin]}>{sites[destination]}{items[item]}"
        for origin, destination, item in zip(
            lanes.origin[rows].tolist(),
            lanes.destination[rows].tolist(),
            lanes.item[rows].tolist(),
            strict=True,
        )
    ]


def ranks(lanes: LaneTable) -> IntArray:
    """Return, for each lane, its position among the lanes of its origin, destination and item.

    The table is in normal form, where those without an id come first: for them, it is the number
    of lanes that precede them in their numbering.
    """
    rows = np.arange(len(lanes), dtype=np.int64)
    if len(lanes) == 0:
        return rows
    first = np.ones(len(lanes), dtype=np.bool_)
    first[1:] = (
        (lanes.origin[1:] != lanes.origin[:-1])
        | (lanes.destination[1:] != lanes.destination[:-1])
        | (lanes.item[1:] != lanes.item[:-1])
    )
    return rows - np.maximum.accumulate(np.where(first, rows, 0))


def lane_names(network: Network, rows: IntArray) -> list[str]:
    """Return the name of each lane of ``rows`` (positions in ``network.lanes``)."""
    return [
        given.decode() or (f"{base}#{before + 1}" if before else base)
        for given, base, before in zip(
            network.lanes.ids[rows].tolist(),
            base_names(network, rows),
            ranks(network.lanes)[rows].tolist(),
            strict=True,
        )
    ]


def lane_rows(network: Network, names: Iterable[str]) -> list[int]:
    """Return the row of each named lane, -1 where no lane bears that name."""
    wanted = list(names)
    # A NUL cannot stand in an id, and NumPy would take it for padding.
    encodable = [name.encode("utf-8", "replace") for name in wanted if "\0" not in name]
    found: dict[str, int] = {}
    lanes = network.lanes
    if encodable and len(lanes):
        rows = np.flatnonzero(np.isin(lanes.ids, np.array(encodable)) & (lanes.ids != b""))
        found = {lanes.ids[row].decode(): row for row in rows.tolist()}
    places = _UnnamedLanes(network)
    return [found[name] if name in found else places.row(name) for name in wanted]


class _UnnamedLanes:
    """Finds lanes without an id by their names."""

    def __init__(self, network: Network) -> None:
        """Index the names of sites and items; lanes are in normal form and searched as such."""
        self._lanes = network.lanes
        self._sites = {encoded(site.id): place for place, site in enumerate(network.sites)}
        self._items = {encoded(item.id): place for place, item in enumerate(network.items)}

    def row(self, name: str) -> int:
        """Return the row of the lane without an id that is called ``name``, or -1."""
        base, mark, number = name.partition("#")
        if mark and not (number.isascii() and number.isdigit() and number[0] != "0"):
            return -1
        if mark and (len(number) > 18 or number == "1"):
            return -1
        ends = base.split(">")
        if len(ends) not in (2, 3):
            return -1
        origin, destination = (self._sites.get(end, -1) for end in ends[:2])
        item = self._items.get(ends[2], -2) if len(ends) == 3 else -1
        if origin < 0 or destination < 0 or item < -1:
            return -1
        return self._find(origin, destination, item, rank=int(number) - 1 if mark else 0)

    def _find(self, origin: int, destination: int, item: int, *, rank: int) -> int:
        """Return the row with these ends and this rank, if it has no id of its own."""
        lanes = self._lanes
        low, high = _narrow(lanes.origin, 0, len(lanes), origin)
        low, high = _narrow(lanes.destination, low, high, destination)
        low, high = _narrow(lanes.item, low, high, item)
        row = low + rank
        return row if row < high and lanes.ids[row] == b"" else -1


def _narrow(
    column: Sequence[int] | np.ndarray[tuple[int], np.dtype[np.int32]],
    low: int,
    high: int,
    value: int,
) -> tuple[int, int]:
    """Return the part of the sorted rows ``low`` to ``high`` whose value is ``value``."""
    part = np.asarray(column)[low:high]
    # A plain int would make NumPy copy the whole part to int64 at every search.
    code = np.int32(value)
    return (
        low + int(np.searchsorted(part, code, side="left")),
        low + int(np.searchsorted(part, code, side="right")),
    )
