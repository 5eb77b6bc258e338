"""Names of lanes: the id as given, else ``ORIGIN>DESTINATION[>ITEM]``, then ``#2``, ``#3``.

Lanes without an id that share origin, destination and item are numbered in the order of the normal
form (carrier, unit cost, must-ship, capacity, tags), so that a name never depends on the order in
which lanes were sent. ``>``, ``#`` and ``%`` inside ids are percent-encoded.
"""

from collections.abc import Iterable, Mapping, Sequence

import numpy as np

from service.network.columns import BoolArray, IntArray, LaneTable, Network
from service.network.lane_keys import first_rows

_ENCODED = str.maketrans({"%": "%25", ">": "%3E", "#": "%23"})


def encoded(identifier: str) -> str:
    """Return an id as it stands inside a name."""
    # To look first is three times as fast where nothing is to be encoded.
    plain = not ("%" in identifier or ">" in identifier or "#" in identifier)
    return identifier if plain else identifier.translate(_ENCODED)


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


def follows_its_like(lanes: LaneTable) -> BoolArray:
    """Return which lanes have the origin, destination and item of the one before them."""
    follows = np.zeros(len(lanes), dtype=np.bool_)
    follows[1:] = (
        (lanes.destination[1:] == lanes.destination[:-1])
        & (lanes.origin[1:] == lanes.origin[:-1])
        & (lanes.item[1:] == lanes.item[:-1])
    )
    return follows


def rows_with_ids(lanes: LaneTable) -> IntArray:
    """Return the rows of the lanes that have an id."""
    # Where none has one, a single empty value stands for the whole column.
    one_for_all = lanes.ids.strides == (0,) and not lanes.ids[:1].any()
    return np.zeros(0, np.int64) if one_for_all else np.flatnonzero(lanes.ids != b"")


def ranks(lanes: LaneTable) -> IntArray:
    """Return, for each lane, its position among the lanes of its origin, destination and item.

    The table is in normal form, where those without an id come first: for them, it is the number
    of lanes that precede them in their numbering.
    """
    follows = follows_its_like(lanes)
    if not follows.any():
        return np.zeros(len(lanes), dtype=np.int64)
    rows = np.arange(len(lanes), dtype=np.int64)
    return rows - np.maximum.accumulate(np.where(follows, 0, rows))


def _ranks_at(lanes: LaneTable, rows: IntArray) -> list[int]:
    """Return what ``ranks`` says of ``rows``; where none follows its like, only they are read."""
    latter = rows[rows > 0]
    former = latter - 1
    follows = (
        (lanes.destination[former] == lanes.destination[latter])
        & (lanes.origin[former] == lanes.origin[latter])
        & (lanes.item[former] == lanes.item[latter])
    )
    found: list[int] = ranks(lanes)[rows].tolist() if follows.any() else [0] * len(rows)
    return found


def lane_names(network: Network, rows: IntArray) -> list[str]:
    """Return the name of each lane of ``rows`` (positions in ``network.lanes``)."""
    return [
        given.decode() or (f"{base}#{before + 1}" if before else base)
        for given, base, before in zip(
            network.lanes.ids[rows].tolist(),
            base_names(network, rows),
            _ranks_at(network.lanes, rows),
            strict=True,
        )
    ]


def lane_rows(network: Network, names: Iterable[str]) -> list[int]:
    """Return the row of each named lane, -1 where no lane bears that name."""
    wanted = list(names)
    if not wanted:
        return []
    rows = _unnamed_rows(network, wanted)
    lanes = network.lanes
    given = rows_with_ids(lanes)
    if len(given):
        # A NUL cannot stand in an id, and NumPy would take it for padding.
        encodable = [name.encode("utf-8", "replace") for name in wanted if "\0" not in name]
        given = given[np.isin(lanes.ids[given], np.array(encodable, dtype=np.bytes_))]
        found = {lanes.ids[row].decode(): row for row in given.tolist()}
        rows = [found.get(name, row) for name, row in zip(wanted, rows, strict=True)]
    return rows


def _unnamed_rows(network: Network, names: Sequence[str]) -> list[int]:
    """Return the row of the lane without an id that each name means, -1 for none."""
    sites = {encoded(site.id): place for place, site in enumerate(network.sites)}
    items = {encoded(item.id): place for place, item in enumerate(network.items)}
    places = np.array([_place(name, sites, items) for name in names], dtype=np.int64)
    origin, destination, item, rank = places.T
    first = first_rows(network.lanes, origin, destination, item)
    lanes, rows = network.lanes, first + rank
    found = (origin >= 0) & (first >= 0) & (rows < len(lanes))
    # The rank may lead beyond the lanes of its kind, or to one that has an id of its own.
    at = rows[found]
    found[found] = (
        (lanes.origin[at] == origin[found])
        & (lanes.destination[at] == destination[found])
        & (lanes.item[at] == item[found])
        & (lanes.ids[at] == b"")
    )
    result: list[int] = np.where(found, rows, -1).tolist()
    return result


_NOWHERE = (-1, -1, -1, 0)


def _place(
    name: str, sites: Mapping[str, int], items: Mapping[str, int]
) -> tuple[int, int, int, int]:
    """Return the origin, destination, item (-1: any) and rank that a name says."""
    base, mark, number = name.partition("#")
    if mark and not (number.isascii() and number.isdigit() and number[0] != "0"):
        return _NOWHERE
    # Beyond 18 digits there is no such row, and no such 64-bit number.
    if mark and (len(number) > 18 or number == "1"):
        return _NOWHERE
    origin, *ends = base.split(">")
    if len(ends) not in (1, 2):
        return _NOWHERE
    item = items.get(ends[1], -2) if len(ends) == 2 else -1
    start, end = sites.get(origin, -1), sites.get(ends[0], -1)
    if start < 0 or end < 0 or item < -1:
        return _NOWHERE
    return start, end, item, int(number) - 1 if mark else 0
