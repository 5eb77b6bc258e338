"""Days and movements of a network, the normal form of dates, and the doubts they raise."""

from pathlib import Path
from typing import Any

import pytest

from service.network.canonical import read_network
from service.network.columns import Network
from service.network.days import day_text, movements_of
from service.network.naming import lane_names
from tests.factories import Document, network_document
from tests.network_samples import check, doubted, found
from tests.random_dates import day, moment


def document(*lanes: Document, **more: Any) -> Document:  # noqa: ANN401 - tables and head fields
    """Return a store, two cross-docks and a shop with some lanes."""
    return (
        network_document(
            sites=[
                {"id": "STORE", "roles": ["warehouse"]},
                {"id": "DOCK-1", "roles": ["cross_dock"]},
                {"id": "DOCK-2", "roles": ["cross_dock"]},
                {"id": "SHOP", "roles": ["ship_to"]},
            ],
            supply=[{"site": "STORE", "item": "GOODS", "quantity": "1"}],
            demand=[{"reference": "R", "site": "SHOP", "item": "GOODS", "quantity": "1"}],
            lanes=[{"unit_cost": "1", **lane} for lane in lanes],
        )
        | more
    )


def lane(name: str, **more: Any) -> Document:  # noqa: ANN401 - fields of a lane
    """Return the lane between two sites, such as ``STORE>SHOP``."""
    origin, destination = name.split(">")
    return {"origin": origin, "destination": destination, **more}


def read(sent: Document, folder: Path) -> Network:
    """Return the normal form of a document."""
    report = check(sent, folder)
    assert report.status == "accepted", report.faults
    return read_network(folder / "network.zip")


def moves(network: Network) -> list[tuple[str, str, str]]:
    """Return lane, departure and arrival of every movement."""
    found = movements_of(network)
    names = lane_names(network, found.row)
    days = zip(map(day_text, found.departs), map(day_text, found.arrives), strict=True)
    return [(name, *both) for name, both in zip(names, days, strict=True)]


def test_a_lane_leaves_a_cross_dock_when_something_arrives_there(tmp_path: Path) -> None:
    """Through two docks one after the other, on each day of the one before."""
    network = read(
        document(
            lane("STORE>DOCK-1", transit_days=1),
            lane("STORE>DOCK-1", departs=moment(2, 9), arrives=moment(4, 9)),
            lane("DOCK-1>DOCK-2", transit_days=2),
            lane("DOCK-2>SHOP"),
        ),
        tmp_path,
    )

    assert moves(network) == [
        ("DOCK-1>DOCK-2", day(1), day(3)),
        ("DOCK-1>DOCK-2", day(4), day(6)),
        ("DOCK-2>SHOP", day(3), day(3)),
        ("DOCK-2>SHOP", day(6), day(6)),
        ("STORE>DOCK-1", day(2), day(4)),
        ("STORE>DOCK-1#2", day(0), day(1)),
    ]


def test_cross_docks_in_a_circle_come_to_an_end(tmp_path: Path) -> None:
    """There are two docks, so that no way needs to be followed further than over two of them."""
    network = read(
        document(
            lane("STORE>DOCK-1"),
            lane("DOCK-1>DOCK-2", transit_days=1),
            lane("DOCK-2>DOCK-1", transit_days=1),
            lane("DOCK-2>SHOP"),
        ),
        tmp_path,
    )

    assert [move for move in moves(network) if move[0] == "DOCK-2>SHOP"] == [
        ("DOCK-2>SHOP", day(1), day(1)),
    ]


def test_periods_are_the_days_on_which_goods_leave(tmp_path: Path) -> None:
    """Days before the cut-off are no use, and what arrives on another day stays where it is."""
    network = read(
        document(
            lane("STORE>DOCK-1", transit_days=1),
            lane("DOCK-1>SHOP"),
            periods=[day(3), day(-1), day(0), day(1)],
        ),
        tmp_path,
    )

    assert network.head["periods"] == [day(-1), day(0), day(1), day(3)]
    assert moves(network) == [
        ("DOCK-1>SHOP", day(1), day(1)),
        ("STORE>DOCK-1", day(0), day(1)),
        ("STORE>DOCK-1", day(1), day(2)),
        ("STORE>DOCK-1", day(3), day(4)),
    ]


def test_dates_are_those_of_the_clocks_where_things_happen(tmp_path: Path) -> None:
    """Over the date line a ship arrives on the day before it left, by the clocks of both ends."""
    sent = document(
        lane("STORE>SHOP", departs="2026-02-03T15:30:00Z", arrives="2026-02-03T22:00:00Z")
    )
    sent["sites"][0]["time_zone"] = "Asia/Tokyo"
    sent["sites"][3]["time_zone"] = "Pacific/Honolulu"

    network = read(sent, tmp_path)

    assert network.lanes.departs.values == ("2026-02-04T00:30:00+09:00",)
    assert network.lanes.arrives.values == ("2026-02-03T12:00:00-10:00",)
    assert moves(network) == [("STORE>SHOP", "2026-02-04", "2026-02-03")]


def test_one_departure_in_two_spellings_is_one_network(tmp_path: Path) -> None:
    """What is meant has one normal form, whatever offset it was sent with."""
    digests = []
    for number, departs in enumerate(("2026-02-03T18:00:00+01:00", "2026-02-03T17:00:00Z")):
        sent = document(lane("STORE>SHOP", departs=departs))
        sent["sites"][0]["time_zone"] = "Europe/Oslo"
        digests.append(read(sent, tmp_path / str(number)).known_digest)

    assert digests[0] == digests[1]


def test_two_departures_a_day_need_no_ids(tmp_path: Path) -> None:
    """They differ in when they leave, and are numbered in that order."""
    network = read(
        document(
            lane("STORE>SHOP", departs=moment(0, 18)), lane("STORE>SHOP", departs=moment(0, 9))
        ),
        tmp_path,
    )

    assert network.lanes.departs.values == (moment(0, 9), moment(0, 18))
    assert network.lanes.departs.codes.tolist() == [0, 1]


def test_what_dates_make_doubtful_is_said(tmp_path: Path) -> None:
    """A wish that is past, stock that comes after the last departure, a departure that closed."""
    sent = document(lane("STORE>SHOP", transit_days=1), lane("STORE>SHOP", departs=moment(-1, 9)))
    sent["demand"][0]["due"] = day(-2)
    sent["supply"].append(
        {"site": "STORE", "item": "GOODS", "quantity": "1", "available_from": day(1)}
    )

    doubts = doubted(check(sent, tmp_path))

    assert {"departure_closed", "due_overdue", "supply_too_late"} <= set(doubts)
    assert doubts["due_overdue"]["examples"] == [{"pointer": "/demand/0/due", "value": day(-2)}]
    assert doubts["supply_too_late"]["examples"][0]["pointer"] == "/supply/1/available_from"


@pytest.mark.parametrize(
    ("rows", "place", "code"),
    [
        ([{"site": "SHOP"}], "/storage/0/site", "role_missing"),
        ([{"site": "NOWHERE"}], "/storage/0/site", "unknown_site"),
        ([{"site": "DOCK-1", "item": "X"}], "/storage/0/item", "unknown_item"),
        ([{"site": "DOCK-1"}, {"site": "DOCK-1"}], "/storage/1", "duplicate_value"),
        ([{"site": "DOCK-1", "capacity": "1"}], "/storage/0/capacity", "unknown_field"),
    ],
)
def test_storage_that_makes_no_sense_is_refused(
    rows: list[Document], place: str, code: str, tmp_path: Path
) -> None:
    """Goods that arrive wait at cross-docks alone; a limit on them is not to be had yet."""
    report = check(document(lane("STORE>DOCK-1"), storage=rows), tmp_path)

    assert found(report) == [(place, code)]


def test_rows_of_storage_have_one_order(tmp_path: Path) -> None:
    """By site and item."""
    rows = [{"site": "DOCK-2"}, {"site": "DOCK-1", "item": "GOODS"}, {"site": "DOCK-1"}]

    network = read(document(lane("STORE>DOCK-1"), storage=rows), tmp_path)

    assert network.head["storage"] == [rows[2], rows[1], rows[0]]
