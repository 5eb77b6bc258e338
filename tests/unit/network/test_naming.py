"""Names of lanes: the same whatever the order they were sent in, and never two meanings."""

import random
from pathlib import Path
from typing import Any

import numpy as np

from service.network.canonical import read_network
from service.network.columns import Network
from service.network.naming import encoded, lane_names, lane_rows
from tests.network_samples import check, found, sound


def network(tmp_path: Path, lanes: list[dict[str, Any]], *, dock: str = "X") -> Network:
    """Return the network that has these lanes, from stock at Y through ``dock`` to YARD-07."""
    document = sound()
    document["sites"][1]["id"] = dock
    document["lanes"] = lanes
    document["rules"] = []
    del document["control"]
    assert found(check(document, tmp_path)) == []
    return read_network(tmp_path / "network.zip")


def names(network: Network) -> list[str]:
    """Return the names of all lanes of a network."""
    return lane_names(network, np.arange(len(network.lanes)))


def test_unnamed_lanes_are_called_after_their_ends(tmp_path: Path) -> None:
    """ORIGIN>DESTINATION[>ITEM], then #2 in the order of carrier, cost, ..."""
    lanes = [
        {"origin": "Y", "destination": "X", "unit_cost": "3", "carrier": "B"},
        {"origin": "Y", "destination": "X", "unit_cost": "2", "carrier": "B"},
        {"origin": "Y", "destination": "X", "unit_cost": "9", "carrier": "A"},
        {"origin": "Y", "destination": "X", "unit_cost": "1", "id": "GIVEN"},
        {"origin": "Y", "destination": "X", "unit_cost": "1", "item": "BRINE"},
    ]
    found_network = network(tmp_path, lanes)

    by_name = {
        name: found_network.lanes.unit_cost.fraction(row)
        for row, name in enumerate(names(found_network))
    }
    assert by_name == {"Y>X": 9, "Y>X#2": 2, "Y>X#3": 3, "GIVEN": 1, "Y>X>BRINE": 1}


def test_names_do_not_depend_on_the_order_of_lanes(tmp_path: Path) -> None:
    """A rule that names a lane must mean the same lane tomorrow."""
    lanes = [
        {"origin": "Y", "destination": "X", "unit_cost": str(cost), "capacity": capacity}
        for cost in (1, 2, 3)
        for capacity in (5, 6, None)
    ]
    expected = names(network(tmp_path / "0", lanes))
    for number in range(1, 4):
        random.Random(number).shuffle(lanes)  # noqa: S311 - an order, not a secret

        assert names(network(tmp_path / str(number), lanes)) == expected


def test_marks_inside_ids_are_percent_encoded(tmp_path: Path) -> None:
    """Otherwise a site called "A>B" could make two lanes share a name."""
    assert encoded("a>b#c%d") == "a%3Eb%23c%25d"
    lanes = [{"origin": "Y", "destination": "a>b#c%", "unit_cost": "1"}]

    assert names(network(tmp_path, lanes, dock="a>b#c%")) == ["Y>a%3Eb%23c%25"]


def test_every_lane_is_found_by_its_name_and_no_other_text_finds_one(tmp_path: Path) -> None:
    """Selectors of rules and readers of certificates look lanes up by name."""
    lanes = [
        {"origin": "Y", "destination": "X", "unit_cost": str(cost), "item": item}
        for cost in (1, 2)
        for item in (None, "BRINE")
    ]
    lanes.append({"origin": "X", "destination": "YARD-07", "unit_cost": "1", "id": "G>"})
    found_network = network(tmp_path, lanes)
    all_names = names(found_network)

    assert lane_rows(found_network, all_names) == list(range(len(all_names)))
    others = ["", "Y", "Y>X#1", "Y>X#3", "Y>X#02", "Y>X>", "Y>X>ROAD-25", "X>Y", "G>#2"]
    others += ["X>YARD-07", "Y>X>BRINE>", "Y>X#" + "9" * 30, "Y>X\0", "\ud800", "Y>X#2#2"]
    assert lane_rows(found_network, others) == [-1] * len(others)


def test_an_id_that_is_the_own_name_says_nothing(tmp_path: Path) -> None:
    """A network read from our own plan has the digest of the one that was planned."""
    plain = [
        {"origin": "Y", "destination": "X", "unit_cost": "2"},
        {"origin": "Y", "destination": "X", "unit_cost": "3"},
        {"origin": "X", "destination": "YARD-07", "unit_cost": "1"},
    ]
    named = [dict(lane) for lane in plain]
    for lane, name in zip(named, ("Y>X", "Y>X#2", "X>YARD-07"), strict=True):
        lane["id"] = name
    document = sound()
    document["rules"] = []
    del document["control"]
    reports = []
    for number, lanes in enumerate((plain, named, [plain[1], named[0], plain[2]])):
        document["lanes"] = lanes
        reports.append(check(document, tmp_path / str(number)))

    digests = [report.summary and report.summary["network_digest"] for report in reports]
    assert None not in digests
    assert len(set(digests)) == 1


def test_an_id_that_disagrees_with_the_numbering_stays(tmp_path: Path) -> None:
    """While nobody else bears it, Y>X#2 on a lane that would be Y>X is an id like any other."""
    lanes = [
        {"origin": "Y", "destination": "X", "unit_cost": "2", "id": "Y>X#2"},
        {"origin": "X", "destination": "YARD-07", "unit_cost": "1"},
    ]

    assert names(network(tmp_path, lanes)) == ["X>YARD-07", "Y>X#2"]
