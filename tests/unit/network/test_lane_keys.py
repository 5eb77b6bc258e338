"""Lanes are sorted and found by one number, also where three codes of 31 bits make it long."""

import json
from dataclasses import replace

import numpy as np
import pytest

from service.network.columns import LaneTable
from service.network.files.json import read_json
from service.network.lane_keys import LaneKeys, first_rows
from service.network.options import Options
from service.network.reading import read_network
from tests.network_samples import sound

MOST = 2**31 - 1


def lanes_of(ends: list[tuple[int, int, int]]) -> LaneTable:
    """Return a table of lanes with these origins, destinations and items."""
    columns = np.array(sorted(ends), dtype=np.int32).reshape(-1, 3).T
    document = read_json(json.dumps(sound()).encode(), nesting_max=16).value
    made = read_network(document, Options()).network
    assert made is not None
    return replace(made.lanes, origin=columns[0], destination=columns[1], item=columns[2])


@pytest.mark.parametrize(
    "ends",
    [
        [(0, 1, -1), (0, 1, 0), (0, 1, 2), (3, 0, -1), (3, 2, 1)],
        [(0, MOST, -1), (0, MOST, MOST), (MOST, 0, -1), (MOST, MOST, 0), (MOST, MOST, MOST)],
        [(7, 7, 7)],
    ],
)
def test_keys_sort_as_ends_and_items_do_and_find_them(ends: list[tuple[int, int, int]]) -> None:
    """The order of the normal form and the search for a name rest on it."""
    table = lanes_of([*ends, ends[0]])
    lanes = LaneKeys(table)
    others = [(0, 0, 0), (1, 1, 1), (MOST, 1, 0), (MOST, MOST, -1), (0, MOST, 1), (-1, -1, -1)]
    asked = np.array([*ends, *others], dtype=np.int64)

    found = first_rows(table, *asked.T)

    assert (np.diff(lanes.keys) >= 0).all()
    assert len(set(lanes.keys.tolist())) == len(ends)
    order = sorted([*ends, ends[0]])
    assert found.tolist() == [order.index(end) if end in order else -1 for end in (*ends, *others)]


def test_a_table_without_lanes_has_none_to_find() -> None:
    """A network need not have lanes."""
    none = np.zeros(1, dtype=np.int64)

    assert first_rows(lanes_of([]), none, none, none).tolist() == [-1]
