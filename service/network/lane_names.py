"""Checks of what lanes are called, so that a name means one lane and stays the same for ever."""

from dataclasses import replace

import numpy as np

from service.network.columns import IdArray, IntArray, LaneTable, Network
from service.network.naming import base_names, follows_its_like, lane_names, ranks
from service.network.normal_form import lane_order
from service.network.table_rows import rows_of


def own_names_dropped(network: Network) -> IdArray:
    """Return the ids of the lanes without those that equal the name a lane has anyway.

    A network that was read from our own output so gets the digest of the one it came from. Of the
    lanes that share origin, destination and item either all such ids go or, where they do not
    agree with the numbering, none. The lanes are in the order of the normal form.
    """
    lanes = network.lanes
    suspects = _named_like_ours(lanes)
    given = [identifier.decode() for identifier in lanes.ids[suspects].tolist()]
    alike = [
        identifier == base or identifier.startswith(f"{base}#")
        for identifier, base in zip(given, base_names(network, suspects), strict=True)
    ]
    rows = suspects[np.array(alike, dtype=np.bool_)]
    if len(rows) == 0:
        return lanes.ids
    blank = lanes.ids.copy()
    blank[rows] = b""
    order = lane_order(replace(lanes, ids=blank))
    place = np.empty(len(order), dtype=np.int64)
    place[order] = np.arange(len(order))
    renamed = replace(network, lanes=rows_of(replace(lanes, ids=blank), order))
    names = np.array([name.encode() for name in lane_names(renamed, place[rows])])
    group = np.cumsum(ranks(lanes) == 0)
    strange = group[rows[names != lanes.ids[rows]]]
    kept = rows[np.isin(group[rows], strange)]
    blank[kept] = lanes.ids[kept]
    return blank


def identical_lanes(network: Network) -> IntArray:
    """Return rows of lanes without an id that no name could tell from the one before them."""
    lanes = network.lanes
    latter = np.flatnonzero(follows_its_like(lanes) & (lanes.ids == b""))
    former = latter - 1
    same = (
        (lanes.carrier.codes[former] == lanes.carrier.codes[latter])
        & (lanes.unit_cost.values[former] == lanes.unit_cost.values[latter])
        & (lanes.must_ship.values[former] == lanes.must_ship.values[latter])
        & (lanes.capacity.present[former] == lanes.capacity.present[latter])
        & (lanes.capacity.values[former] == lanes.capacity.values[latter])
        & (lanes.tags.codes[former] == lanes.tags.codes[latter])
        & (lanes.transit_days.present[former] == lanes.transit_days.present[latter])
        & (lanes.transit_days.values[former] == lanes.transit_days.values[latter])
        & (lanes.departs.codes[former] == lanes.departs.codes[latter])
        & (lanes.arrives.codes[former] == lanes.arrives.codes[latter])
        & (lanes.closes.codes[former] == lanes.closes.codes[latter])
    )
    found: IntArray = latter[same]
    return found


def taken_names(network: Network) -> IntArray:
    """Return rows of lanes whose id is the name of another lane, which has no id."""
    suspects = _named_like_ours(network.lanes)
    unnamed = np.flatnonzero(network.lanes.ids == b"")
    if len(suspects) == 0 or len(unnamed) == 0:
        return suspects[:0]
    names = {name.encode() for name in lane_names(network, unnamed)}
    taken = [identifier in names for identifier in network.lanes.ids[suspects].tolist()]
    found: IntArray = suspects[np.array(taken, dtype=np.bool_)]
    return found


def _named_like_ours(lanes: LaneTable) -> IntArray:
    """Return the lanes whose id could be a name of ours: it joins ends by ``>``."""
    if len(lanes) == 0 or lanes.ids.dtype.itemsize < 2:
        return np.zeros(0, dtype=np.int64)
    return np.flatnonzero(np.char.find(lanes.ids, b">") >= 0)
