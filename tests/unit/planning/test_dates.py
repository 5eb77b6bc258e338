"""Dates in plans, each small enough to be worked out by hand."""

from typing import Any

import pytest

from tests.factories import Document, network_document, plan_network
from tests.random_dates import day, moment

STORE = {"id": "STORE", "roles": ["warehouse"]}
DOCK = {"id": "DOCK", "roles": ["cross_dock"]}
SHOP = {"id": "SHOP", "roles": ["ship_to"]}


def lane(origin: str, destination: str, cost: int, **more: Any) -> Document:  # noqa: ANN401 - fields
    """Return a lane; its name is its ends and its cost."""
    name = f"{origin}-{destination}-{cost}"
    ends = {"id": name, "origin": origin, "destination": destination, "unit_cost": str(cost)}
    return ends | more


def line(quantity: int = 10, **more: Any) -> Document:  # noqa: ANN401 - fields of an order line
    """Return the order line of the shop."""
    return {"reference": "R", "site": "SHOP", "item": "GOODS", "quantity": str(quantity)} | more


def network(*lanes: Document, **more: Any) -> Document:  # noqa: ANN401 - tables, head fields
    """Return a store with 10, a cross-dock and a shop that wants 10, with some lanes."""
    demand = more.pop("demand", [line()])
    supply = more.pop("supply", [{"site": "STORE", "item": "GOODS", "quantity": "10"}])
    sites = more.pop("sites", [STORE, DOCK, SHOP])
    return network_document(sites=sites, supply=supply, demand=demand, lanes=lanes) | more


def shown(document: Document) -> list[tuple[str, str, str, str]]:
    """Return lane, departure, arrival and quantity of every plan line."""
    return [
        (row["lane"], row["departs"], row["arrives"], row["quantity"])
        for row in plan_network(document).plan["plan_lines"]
    ]


def test_dates_are_not_tested_lane_by_lane_behind_a_cross_dock() -> None:
    """Each lane alone arrives by the latest date; one after the other they come a day too late.

    Two days to the cross-dock and two on make four, and the line may wait three. Only the dear way
    of one day and two is in time.
    """
    document = network(
        lane("STORE", "DOCK", 1, transit_days=2),
        lane("STORE", "DOCK", 9, transit_days=1),
        lane("DOCK", "SHOP", 1, transit_days=2),
        demand=[line(latest=day(3))],
    )

    assert shown(document) == [
        ("DOCK-SHOP-1", day(1), day(3), "10"),
        ("STORE-DOCK-9", day(0), day(1), "10"),
    ]


def test_goods_leave_a_cross_dock_on_the_days_on_which_they_reach_it() -> None:
    """Capacity is that of each day: 6 come on one day and 4 on the next, and all can go on."""
    document = network(
        lane("STORE", "DOCK", 1, transit_days=1, capacity="6"),
        lane("STORE", "DOCK", 2, transit_days=2),
        lane("DOCK", "SHOP", 1, transit_days=1, capacity="6"),
    )

    assert shown(document) == [
        ("DOCK-SHOP-1", day(1), day(2), "6"),
        ("DOCK-SHOP-1", day(2), day(3), "4"),
        ("STORE-DOCK-1", day(0), day(1), "6"),
        ("STORE-DOCK-2", day(0), day(2), "4"),
    ]


def test_lateness_comes_after_shortage_and_before_money() -> None:
    """The dear lane is quick but carries 4: the other 6 come a day late rather than not at all."""
    document = network(
        lane("STORE", "SHOP", 1, transit_days=3),
        lane("STORE", "SHOP", 50, transit_days=2, capacity="4"),
        demand=[line(due=day(2), priority=3)],
    )

    planned = plan_network(document)

    steps = [(step["of"], step["achieved"]) for step in planned.certificate["steps"]]
    # 6 steps, 1 day, weight 10 - 3; 4 * 50 + 6 * 1.
    assert steps == [("shortage", "0"), ("lateness", "42"), ("cost", "206")]
    assert planned.plan["order_lines"][0]["days_late"] == 1
    assert planned.plan["totals"]["lines_late"] == 1


def test_lateness_with_a_price_is_weighed_against_freight() -> None:
    """2 a day and unit: two days late cost 4 and save 5, so that everything goes slowly."""
    document = network(
        lane("STORE", "SHOP", 1, transit_days=4),
        lane("STORE", "SHOP", 6, transit_days=2),
        demand=[line(due=day(2), late_cost_per_day="2")],
    )

    planned = plan_network(document)

    assert [row["lane"] for row in planned.plan["plan_lines"]] == ["STORE-SHOP-1"]
    assert planned.plan["cost_parts"]["lateness"] == "40"
    assert planned.plan["total_cost"] == "50"


def test_nothing_arrives_before_the_earliest_date() -> None:
    """The quick lane would be there a day too soon, and so the dear slow one is taken."""
    document = network(
        lane("STORE", "SHOP", 1, transit_days=1),
        lane("STORE", "SHOP", 9, transit_days=2),
        demand=[line(earliest=day(2))],
    )

    assert shown(document) == [("STORE-SHOP-9", day(0), day(2), "10")]


def test_later_stock_goes_with_later_departures_only() -> None:
    """3 are there now, 7 from tomorrow on: the cheap departure of today takes 3."""
    document = network(
        lane("STORE", "SHOP", 1, departs=moment(0, 18), arrives=moment(1, 6)),
        lane("STORE", "SHOP", 5, departs=moment(1, 18), arrives=moment(2, 6)),
        supply=[
            {"site": "STORE", "item": "GOODS", "quantity": "3", "lot": "NOW"},
            {
                "site": "STORE",
                "item": "GOODS",
                "quantity": "7",
                "lot": "SOON",
                "available_from": day(1),
            },
        ],
    )

    planned = plan_network(document)

    assert [
        (source["lot"], source["quantity"], source["legs"][0]["departs"], source["arrives"])
        for source in planned.plan["order_lines"][0]["sources"]
    ] == [("NOW", "3", day(0), day(1)), ("SOON", "7", day(1), day(2))]


def test_periods_let_stock_leave_on_several_days() -> None:
    """4 a day on three days, of which a weekend is none: 4, 4 and 2."""
    document = network(
        lane("STORE", "SHOP", 1, transit_days=1, capacity="4"),
        periods=[day(0), day(1), day(4)],
    )

    assert shown(document) == [
        ("STORE-SHOP-1", day(0), day(1), "4"),
        ("STORE-SHOP-1", day(1), day(2), "4"),
        ("STORE-SHOP-1", day(4), day(5), "2"),
    ]


def test_a_departure_of_yesterday_makes_no_yesterday() -> None:
    """Stock at the shop itself serves today at the earliest, and so comes a day late."""
    document = network(
        lane("SHOP", "DOCK", 1, departs=moment(-1, 9)),
        sites=[STORE, DOCK, {"id": "SHOP", "roles": ["ship_to", "warehouse"]}],
        supply=[{"site": "SHOP", "item": "GOODS", "quantity": "10"}],
        demand=[line(due=day(-1))],
    )

    planned = plan_network(document)

    assert planned.plan["order_lines"][0]["days_late"] == 1
    assert planned.plan["order_lines"][0]["sources"][0]["arrives"] == day(0)


def test_goods_stay_overnight_only_where_storage_allows() -> None:
    """They reach the dock a day before the only lorry; with a bed for the night all of them go."""
    document = network(
        lane("STORE", "DOCK", 1, transit_days=1),
        lane("DOCK", "SHOP", 1, departs=moment(2, 8), arrives=moment(2, 12)),
    )

    (short,) = plan_network(document).plan["shortages"]
    planned = plan_network(document | {"storage": [{"site": "DOCK"}]})

    assert (short["quantity"], short["reason"]) == ("10", "too_late")
    assert planned.plan["shortages"] == []
    assert planned.certificate["items"][0]["stored"] == [
        {"site": "DOCK", "day": day(1), "quantity": "10"}
    ]
    legs = planned.plan["order_lines"][0]["sources"][0]["legs"]
    assert [(leg["departs"], leg["arrives"]) for leg in legs] == [
        (day(0), day(1)),
        (day(2), day(2)),
    ]


def test_storage_smooths_a_lane_that_carries_little_a_day() -> None:
    """10 arrive at once and 4 a day can go on: 4, 4 and 2 on three days."""
    document = network(
        lane("STORE", "DOCK", 1, transit_days=0),
        lane("DOCK", "SHOP", 1, capacity="4"),
        periods=[day(0), day(1), day(2)],
        storage=[{"site": "DOCK", "item": "GOODS"}],
        demand=[line(earliest=day(0), due=day(0))],
    )

    assert [row[1:] for row in shown(document) if row[0] == "DOCK-SHOP-1"] == [
        (day(0), day(0), "4"),
        (day(1), day(1), "4"),
        (day(2), day(2), "2"),
    ]


def test_a_departure_that_closed_is_left_out_with_a_warning() -> None:
    """It closed at nine and the plan is made at ten; a closing time counts, not the departure."""
    document = network(
        lane("STORE", "SHOP", 1, closes=moment(0, 9), departs=moment(0, 18)),
        lane("STORE", "SHOP", 9, closes=moment(0, 11), departs=moment(0, 18)),
        planned_at=moment(0, 10),
    )

    planned = plan_network(document)

    assert [row["lane"] for row in planned.plan["plan_lines"]] == ["STORE-SHOP-9"]
    assert [warning["code"] for warning in planned.plan["warnings"]] == ["departure_closed"]


@pytest.mark.parametrize(
    ("lanes", "reason"),
    [
        ([lane("STORE", "SHOP", 1, transit_days=4)], "too_late"),
        ([lane("STORE", "DOCK", 1, transit_days=4)], "no_lane"),
        (
            [lane("STORE", "SHOP", 1, closes=moment(-1, 9), departs=moment(0, 9))],
            "closed",
        ),
    ],
)
def test_a_shortage_says_that_dates_are_the_reason(lanes: list[Document], reason: str) -> None:
    """Nobody should look for more stock where the next lorry is what is missing."""
    planned = plan_network(network(*lanes, demand=[line(latest=day(3))]))

    assert [row["reason"] for row in planned.plan["shortages"]] == [reason]


def test_the_next_chance_is_the_next_stock() -> None:
    """What comes in on a later day is named where stock is what is missing."""
    document = network(
        lane("STORE", "SHOP", 1),
        supply=[{"site": "STORE", "item": "GOODS", "quantity": "9", "available_from": day(6)}],
        demand=[line(latest=day(3))],
    )

    planned = plan_network(document)

    assert [(row["reason"], row["next_chance"]) for row in planned.plan["shortages"]] == [
        ("no_stock", day(6))
    ]


def test_days_that_nothing_tells_apart_are_one_place() -> None:
    """Five departures of a store make no five stores; a window of the shop makes two shops."""
    departures = [
        lane("STORE", "SHOP", cost, departs=moment(cost, 8), arrives=moment(cost, 20))
        for cost in range(1, 6)
    ]

    planned = plan_network(network(*departures, demand=[line(latest=day(3))]))

    places = [
        (price["site"], price["day"])
        for price in planned.certificate["items"][0]["prices"]
        if price["side"] == "in"
    ]
    assert places == [("SHOP", day(1)), ("SHOP", day(4)), ("STORE", day(1))]


def test_a_plan_without_dates_shows_none() -> None:
    """Nothing is added to plan and certificate of a network that says nothing of dates."""
    planned = plan_network(network(lane("STORE", "SHOP", 1)))

    line_ = planned.plan["order_lines"][0]
    assert "departs" not in planned.plan["plan_lines"][0]
    assert not {"days_late", "due"} & set(line_)
    assert "lines_late" not in planned.plan["totals"]
    assert all("day" not in price for price in planned.certificate["items"][0]["prices"])


def test_what_must_move_on_several_days_is_refused_by_name() -> None:
    """A minimum over several days joins them, and that is not built."""
    from tests.factories import NetworkRefused  # noqa: PLC0415 - the only use

    document = network(lane("STORE", "SHOP", 1, must_ship="3"), periods=[day(0), day(1)])

    with pytest.raises(NetworkRefused) as refused:
        plan_network(document)

    assert [fault.code for fault in refused.value.report.faults] == ["not_yet"]
