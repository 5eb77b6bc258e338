"""Rows, columns and cost tables mean the same, and each points to the place that was sent."""

import itertools
import random
from pathlib import Path
from typing import Any

import pytest

from service.network.canonical import network_entries, normal_form, read_network
from tests.network_samples import check, doubted, found, sound


def as_columns(rows: list[dict[str, Any]]) -> dict[str, list[Any]]:
    """Return rows as columns; what a row lacks is null."""
    names = dict.fromkeys(itertools.chain.from_iterable(rows))
    return {name: [row.get(name) for row in rows] for name in names}


def digest(document: dict[str, Any], folder: Path) -> object:
    """Return the network digest of an accepted document."""
    report = check(document, folder)
    assert report.summary is not None, report.faults
    return report.summary["network_digest"]


def dense() -> dict[str, Any]:
    """Return a network whose lanes fit in a cost table, with one pair that has no lane."""
    document = sound()
    document["rules"] = []
    del document["control"]
    document["lanes"] = {
        "origins": ["DEP-NORTH", "X"],
        "destinations": ["YARD-07", "X"],
        "item": "ROAD-25",
        "carrier": "C-RAIL",
        "tags": ["a", "b"],
        "unit_cost": [["0.215", 3], [0.5, None]],
        "capacity": [[2000, None], ["7.5", None]],
        "measure": [[None, None], ["pallet", None]],
    }
    return document


ROWS = [
    {"origin": "DEP-NORTH", "destination": "YARD-07", "unit_cost": "0.215", "capacity": "2000"},
    {"origin": "DEP-NORTH", "destination": "X", "unit_cost": "3"},
    {
        "origin": "X",
        "destination": "YARD-07",
        "unit_cost": "0.5",
        "capacity": "7.5",
        "measure": "pallet",
    },
]
COMMON = {"item": "ROAD-25", "carrier": "C-RAIL", "tags": ["b", "a"]}


def test_all_forms_and_orders_have_one_digest(tmp_path: Path) -> None:
    """The digest is that of the meaning, not of the bytes that were sent."""
    document = dense()
    rows = [{**row, **COMMON} for row in ROWS]
    shuffled = list(rows)
    random.Random(1).shuffle(shuffled)  # noqa: S311 - an order, not a secret
    halves = [
        {"origins": ["X"], "destinations": ["YARD-07"], "unit_cost": [[0.5]], **COMMON}
        | {"capacity": "7.5", "measure": "pallet"},
        {
            "origins": ["DEP-NORTH"],
            "destinations": ["X", "YARD-07"],
            "unit_cost": [["3", "0.215"]],
            "capacity": [[None, 2000]],
        }
        | COMMON,
    ]
    forms = [document["lanes"], rows, shuffled, as_columns(rows), as_columns(shuffled), halves]

    digests = set()
    for number, lanes in enumerate(forms):
        document = dense()
        document["lanes"] = lanes
        digests.add(digest(document, tmp_path / str(number)))

    assert len(digests) == 1


def test_supply_and_demand_may_be_columns(tmp_path: Path) -> None:
    """And items, sites, rows and rules may come in any order."""
    expected = digest(sound(), tmp_path / "rows")
    document = sound()
    # A line without a reference is named after its row, so that it must be given one to move.
    document["demand"][1]["reference"] = "#2"
    for name in ("items", "sites", "supply", "demand", "lanes", "rules"):
        document[name].reverse()
    for name in ("supply", "demand", "lanes"):
        document[name] = as_columns(document[name])

    assert digest(document, tmp_path / "columns") == expected


def test_what_is_written_is_the_normal_form(tmp_path: Path) -> None:
    """Sorting again changes nothing, and reading back gives the same digest."""
    for number, document in enumerate((sound(), dense())):
        report = check(document, tmp_path / str(number))
        network = read_network(tmp_path / str(number) / "network.zip")

        assert network_entries(normal_form(network)) == network_entries(network)
        assert report.summary is not None
        assert network.head["cut_off"] == report.summary["cut_off"]


def test_one_value_has_one_digest_however_it_is_written(tmp_path: Path) -> None:
    """Numbers or text, idle zeros, null or absent, a must-ship of 0, an instant in another zone."""
    document = sound()
    document["items"][0]["weight_kg"] = 25.20
    document["items"][0]["extra"] = {}
    document["items"][1]["tags"] = None
    document["supply"][0]["as_of"] = "2026-02-03T14:52:00.000Z"
    document["supply"][1] |= {"quantity": 1.300, "keep": {"quantity": 0}, "unit_cost": None}
    document["demand"][0] |= {"quantity": 880, "unit": "bag", "shortage_cost": None}
    document["lanes"][0] |= {"per": "item", "must_ship": "0.0", "measure": "unit", "tags": []}
    document["rules"][0] |= {"per": "each", "measure": "unit", "note": None}
    document["control"] = None

    assert digest(document, tmp_path / "a") == digest(sound(), tmp_path / "b")


LANES: list[tuple[object, str, str]] = [
    (5, "/lanes", "wrong_type"),
    ([5], "/lanes/0", "wrong_type"),
    ({}, "/lanes/origin", "missing_field"),
    ({"origin": [], "destination": []}, "/lanes/unit_cost", "missing_field"),
    ({"origins": [], "destinations": []}, "/lanes/unit_cost", "missing_field"),
    ({"origin": ["X"], "destination": ["YARD-07"]}, "/lanes/unit_cost", "missing_field"),
    (
        {"origin": ["X"], "destination": ["YARD-07"], "unit_cost": "1"},
        "/lanes/unit_cost",
        "wrong_type",
    ),
    (
        {"origin": ["X", "Y"], "destination": ["YARD-07", "X"], "unit_cost": ["1"]},
        "/lanes/unit_cost",
        "unequal_columns",
    ),
    (
        {"origin": ["X", "Q"], "destination": ["YARD-07", "X"], "unit_cost": ["1", "1"]},
        "/lanes/origin/1",
        "unknown_site",
    ),
    (
        {"origin": ["X"], "destination": ["YARD-07"], "unit_cost": [None]},
        "/lanes/unit_cost/0",
        "missing_field",
    ),
    ({"origins": ["X"]}, "/lanes/destinations", "wrong_type"),
    ({"origins": ["X"], "destinations": ["YARD-07"]}, "/lanes/unit_cost", "missing_field"),
    (
        {"origins": ["X"], "destinations": ["YARD-07"], "unit_cost": None},
        "/lanes/unit_cost",
        "missing_field",
    ),
    (
        {"origins": ["X", "X"], "destinations": ["YARD-07"], "unit_cost": [["1"], ["2"]]},
        "/lanes/origins/1",
        "duplicate_value",
    ),
    (
        {"origins": ["X", "Q"], "destinations": ["YARD-07"], "unit_cost": [["1"], ["2"]]},
        "/lanes/origins/1",
        "unknown_site",
    ),
    (
        {"origins": ["X", "Y"], "destinations": ["YARD-07"], "unit_cost": [["1"]]},
        "/lanes/unit_cost",
        "wrong_shape",
    ),
    (
        {"origins": ["X", "Y"], "destinations": ["YARD-07"], "unit_cost": [["1"], ["1", "2"]]},
        "/lanes/unit_cost/1",
        "wrong_shape",
    ),
    (
        {"origins": ["Y"], "destinations": ["YARD-07", "X"], "unit_cost": [["1", "1e2"]]},
        "/lanes/unit_cost/0/1",
        "not_a_number",
    ),
    (
        {"origins": ["X", "Y"], "destinations": ["X"], "unit_cost": [["1"], ["1"]]},
        "/lanes/destinations/0",
        "lane_to_itself",
    ),
    (
        {"origins": ["X"], "destinations": ["YARD-07"], "unit_cost": [["1"]], "capacity": "-1"},
        "/lanes/capacity",
        "negative_number",
    ),
    (
        {"origins": ["X"], "destinations": ["YARD-07"], "unit_cost": [["1"]], "origin": "Y"},
        "/lanes/origin",
        "unknown_field",
    ),
    (
        {"origins": ["X"], "destinations": ["YARD-07"], "unit_cost": [["1"]], "distance_km": 1},
        "/lanes/distance_km",
        "not_yet",
    ),
    (
        [
            {"origins": ["X"], "destinations": ["YARD-07"], "unit_cost": [["1"]]},
            {"origins": ["Y"], "destinations": ["Q"], "unit_cost": [["1"]]},
        ],
        "/lanes/1/destinations/0",
        "unknown_site",
    ),
    (
        [
            {"origins": ["X"], "destinations": ["YARD-07"], "unit_cost": [["1"]]},
            {"origins": ["Y"], "destinations": ["X"], "unit_cost": [["x"]], "carrier": "C"},
        ],
        "/lanes/1/unit_cost/0/0",
        "not_a_number",
    ),
    (
        [{"origins": ["X"], "destinations": ["YARD-07"], "unit_cost": [["1"]]}, {"origin": "X"}],
        "/lanes/1/origins",
        "wrong_type",
    ),
]


@pytest.mark.parametrize(("lanes", "place", "code"), LANES)
def test_faults_point_into_the_form_that_was_sent(
    lanes: object, place: str, code: str, tmp_path: Path
) -> None:
    """A pointer that names another form's place is of no use to the sender."""
    document = sound()
    document["lanes"] = lanes
    document["rules"] = []
    del document["control"]

    assert (place, code) in found(check(document, tmp_path))


@pytest.mark.parametrize(
    ("lanes", "place"),
    [
        ({"origin": ["X"], "destination": ["YARD-07"], "unit_cost": "1"}, "/lanes/unit_cost"),
        (
            {"origin": ["Y", "X"], "destination": ["X", "YARD-07"], "unit_cost": ["1"]},
            "/lanes/unit_cost",
        ),
        ({"origins": ["X"], "destinations": ["YARD-07"], "unit_cost": [[]]}, "/lanes/unit_cost/0"),
    ],
)
def test_a_column_that_is_none_is_one_fault(lanes: object, place: str, tmp_path: Path) -> None:
    """It was sent, so it is not missing as well."""
    document = sound()
    document["lanes"] = lanes
    document["rules"] = []
    del document["control"]

    assert [where for where, _ in found(check(document, tmp_path))] == [place]


def test_a_shared_value_is_blamed_once(tmp_path: Path) -> None:
    """A wrong origin of a cost table is one mistake, not one for each destination."""
    document = dense()
    document["lanes"]["origins"][0] = "YARD-07"
    document["lanes"]["destinations"][0] = "Y"

    assert found(check(document, tmp_path)) == [("/lanes/origins/0", "role_missing")]


def test_an_unknown_field_is_shown_in_every_row_that_has_it(tmp_path: Path) -> None:
    """One wrong column name of an export stands in every row; the count says so."""
    document = sound()
    for row in document["demand"]:
        row["colour"] = "red"

    report = check(document, tmp_path)

    assert found(report) == [(f"/demand/{row}/colour", "unknown_field") for row in range(2)]
    assert report.fault_count == 2


def test_a_value_beside_a_missing_cost_is_doubted(tmp_path: Path) -> None:
    """Where there is no lane, a capacity does nothing; perhaps a cost was forgotten."""
    document = dense()
    document["lanes"]["capacity"][1][1] = 5

    caution = doubted(check(document, tmp_path))["value_without_lane"]

    assert caution["count"] == 1
    assert caution["examples"] == [{"pointer": "/lanes/capacity/1/1", "value": "5"}]


@pytest.mark.parametrize(
    "empty",
    [
        [],
        {"origin": [], "destination": [], "unit_cost": []},
        {"origins": [], "destinations": [], "unit_cost": []},
    ],
)
def test_no_lanes_are_a_network_too(empty: object, tmp_path: Path) -> None:
    """Then everything is short, which is an answer and no mistake."""
    document = sound()
    document["rules"] = []
    del document["control"]
    document["lanes"] = empty

    assert found(check(document, tmp_path)) == []


def test_nothing_at_all_is_a_network(tmp_path: Path) -> None:
    """Empty arrays are a state of the world, such as before the first order."""
    document = sound()
    for name in ("items", "sites", "supply", "demand", "lanes", "rules"):
        document[name] = []
    del document["control"]

    assert found(check(document, tmp_path)) == []
