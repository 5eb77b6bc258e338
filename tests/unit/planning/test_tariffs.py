"""Plans by freight tariffs, worked out by hand: one line a lane, one bill a shipment."""

from random import Random
from typing import Any

import pytest

from tests.factories import Document, NetworkRefused, network_document, plan_network
from tests.unit.planning.routing import Seen, agree, wide_network


def two_depots(wanted: str, **tariff: Any) -> Document:  # noqa: ANN401 - any field of a tariff
    """Return 100 pieces at each of two depots, and a yard.

    From the north a pallet of 10 costs 8 NOK, and from the third pallet on 12; a NOK is half a
    euro. From the south a piece costs 0.55 euros. So the first 20 pieces from the north cost 0.40
    each, further ones 0.60: 20 come from there, all else from the south.
    """
    document = network_document(
        items=[{"id": "SALT", "unit": "piece", "packs": [{"unit": "pallet", "contains": "10"}]}],
        sites=[
            {"id": "NORTH", "roles": ["warehouse"]},
            {"id": "SOUTH", "roles": ["warehouse"]},
            {"id": "YARD", "roles": ["ship_to"]},
        ],
        supply=[
            {"site": "NORTH", "item": "SALT", "quantity": "100"},
            {"site": "SOUTH", "item": "SALT", "quantity": "100"},
        ],
        demand=[{"reference": "1", "site": "YARD", "item": "SALT", "quantity": wanted}],
        lanes=[
            {"id": "N", "origin": "NORTH", "destination": "YARD", "tariff": "ROAD"},
            {"id": "S", "origin": "SOUTH", "destination": "YARD", "unit_cost": "0.55"},
        ],
        currency="EUR",
    )
    document["exchange_rates"] = [{"currency": "NOK", "rate": "0.5"}]
    document["tariffs"] = [
        {
            "id": "ROAD",
            "version": "2026/1",
            "source": "contract 4711",
            "currency": "NOK",
            "basis": "pallet",
            "break_type": "incremental",
            "breaks": [{"from": "0", "rate": "8"}, {"from": "2", "rate": "12"}],
        }
        | tariff
    ]
    return document


def moved(document: Document) -> dict[str, str]:
    """Return the quantity on each lane of the plan."""
    lines = plan_network(document).plan["plan_lines"]
    return {line["lane"]: line["quantity"] for line in lines}


@pytest.mark.parametrize(
    ("wanted", "expected"),
    [
        ("15", {"N": "15"}),
        ("20", {"N": "20"}),
        ("21", {"N": "20", "S": "1"}),
        ("120", {"N": "20", "S": "100"}),
        ("150", {"N": "50", "S": "100"}),
    ],
)
def test_the_cheaper_steps_of_a_tariff_go_first(wanted: str, expected: dict[str, str]) -> None:
    """A lane is used up to its break before a lane between its two rates, and that before more."""
    assert moved(two_depots(wanted)) == expected


def test_a_lane_is_one_plan_line_with_the_freight_of_the_whole_shipment() -> None:
    """5 pallets: 2 at 8 and 3 at 12 are 52 NOK, 26 euros, 0.52 a piece."""
    plan = plan_network(two_depots("150")).plan

    north, _ = plan["plan_lines"]
    assert (north["quantity"], north["transport_cost"], north["unit_cost"]) == ("50", "26", "0.52")
    assert north["stated"] == {"currency": "NOK", "transport_cost": "52"}
    assert plan["total_cost"] == "81"
    assert [row["amount"] for row in plan["currencies"]] == ["52"]
    (source, _) = plan["order_lines"][0]["sources"]
    assert source["quantity"] == "50"
    assert source["legs"] == [{"lane": "N"}]


def test_the_bill_of_a_consignment_says_how_it_comes_about() -> None:
    """Minimum and surcharge stand beside what the rates come to: 52 NOK and a quarter more."""
    plan = plan_network(two_depots("150", surcharge_percent="25")).plan

    bill = plan["consignments"][0]["freight"]
    assert bill == {
        "tariff": "ROAD",
        "version": "2026/1",
        "source": "contract 4711",
        "basis": "pallet",
        "measured": "5",
        "charged": "5",
        "rate": "12",
        "parts": [
            {"from": "0", "quantity": "2", "rate": "8", "amount": "16"},
            {"from": "2", "quantity": "3", "rate": "12", "amount": "36"},
        ],
        "minimum_charge": "0",
        "surcharge_percent": "25",
        "currency": "NOK",
        "amount": "65",
        "cost": "32.5",
    }


def test_the_tariff_of_the_day_of_departure_is_charged() -> None:
    """Two versions of one tariff; orders close on the last day of the first."""
    document = two_depots("20", valid_until="2026-02-03")
    document["tariffs"].append(
        document["tariffs"][0]
        | {"valid_from": "2026-02-04", "valid_until": "2026-12-31", "version": "2026/2"}
        | {"breaks": [{"from": "0", "rate": "99"}], "break_type": "incremental"}
    )

    before = plan_network(document).plan
    document["cut_off"] = "2026-02-04T00:00:00+01:00"
    after = plan_network(document).plan

    assert before["consignments"][0]["freight"]["version"] == "2026/1"
    assert [row["lane"] for row in after["consignments"]] == ["S"]


@pytest.mark.parametrize(
    ("rule", "expected"),
    [
        # 30 are fixed: the last of them costs more than from the south, so one less would pay.
        ({"quantity": "30"}, True),
        # 10 are fixed: an eleventh would cost less than from the south, so one more would pay.
        ({"quantity": "10"}, True),
        # 20 would come without the rule.
        ({"quantity": "20"}, False),
    ],
)
def test_a_fixed_quantity_binds_where_another_would_be_cheaper(
    rule: dict[str, str], *, expected: bool
) -> None:
    """Within a tariff, cheaper steps that are full say nothing of the rule."""
    document = two_depots("60")
    document["rules"] = [{"rule": "fixed_quantity", "id": "R", "lanes": {"ids": ["N"]}} | rule]

    plan = plan_network(document).plan

    assert plan["plan_lines"][0]["quantity"] == rule["quantity"]
    assert plan["rules_in_force"][0]["binding"] is expected


def test_limits_of_a_lane_hold_over_all_its_steps() -> None:
    """A must-ship reaches into the dearer steps, a capacity ends within the cheaper ones."""
    document = two_depots("60")
    document["lanes"][0]["must_ship"] = "25"
    assert moved(document) == {"N": "25", "S": "35"}

    document["lanes"][0] |= {"must_ship": "0", "capacity": "15"}
    assert moved(document) == {"N": "15", "S": "45"}

    document["rules"] = [{"rule": "closure", "id": "R", "lanes": {"ids": ["N"]}}]
    assert moved(document) == {"S": "60"}


def test_a_shortage_behind_a_full_lane_is_told_as_before() -> None:
    """The breaks of a tariff are no limit: what is missing is missing for another reason."""
    document = two_depots("60")
    document["lanes"] = [document["lanes"][0] | {"capacity": "45"}]

    (short,) = plan_network(document).plan["shortages"]

    assert (short["quantity"], short["reason"]) == ("15", "lane_full")


def test_minimums_that_cannot_be_are_told_by_the_name_of_the_lane() -> None:
    """A lane stands once in the reason, however many prices it has."""
    document = two_depots("10")
    document["lanes"] = [document["lanes"][0] | {"must_ship": "50"}]

    planned = plan_network(document)

    assert planned.plan["status"] == "no_plan"
    assert planned.plan["reason"]["detail"].count("lane N") <= 1


def test_lanes_with_several_prices_are_sifted_to_the_plan_of_the_full_solve() -> None:
    """Sifting sees each price of a lane as a lane; plan and certificate are the same bytes."""
    rng = Random(7)  # noqa: S311 - draws a network, hides nothing
    document = wide_network(
        rng, origins=12, ends=120, costs=lambda own: own.randint(100, 9_999), capped=0.3, docks=3
    )
    document["tariffs"] = []
    for number in range(9):
        rates = sorted(rng.randint(100, 9_999) for _ in range(3))
        breaks = [
            {"from": str(start), "rate": str(rate)}
            for start, rate in zip((0, 4, 11), rates, strict=True)
        ]
        document["tariffs"].append(
            {"id": f"T{number}", "basis": "unit", "breaks": breaks, "break_type": "incremental"}
        )
    for number, lane in enumerate(document["lanes"]):
        if rng.random() < 0.6:
            del lane["unit_cost"]
            lane |= {"id": f"L{number}", "tariff": f"T{rng.randrange(9)}"}
    seen = Seen()

    agree(document, seen.front())

    assert seen.sifted == [True]


def test_each_departure_is_a_shipment_of_its_own() -> None:
    """Two days of departure: 20 pieces by the cheap rate on each, and the dearer tariff later.

    On the second day a pallet costs 10 and 14 NOK. 60 pieces from the north alone: 20 at 0.40 and
    20 at 0.50 first; of the dearer 0.60 and 0.70 the former.
    """
    document = two_depots("60", valid_until="2026-02-03")
    document["tariffs"].append(
        document["tariffs"][0]
        | {"valid_from": "2026-02-04", "valid_until": "2026-02-05", "version": "2026/2"}
        | {"breaks": [{"from": "0", "rate": "10"}, {"from": "2", "rate": "14"}]}
    )
    document["lanes"] = document["lanes"][:1]
    document["periods"] = ["2026-02-03", "2026-02-04"]

    plan = plan_network(document).plan

    bills = [
        (row["departs"], row["freight"]["version"], row["freight"]["charged"], row["cost"])
        for row in plan["consignments"]
    ]
    assert bills == [("2026-02-03", "2026/1", "4", "20"), ("2026-02-04", "2026/2", "2", "10")]


def test_a_lane_without_a_tariff_on_one_of_its_days_is_refused() -> None:
    """A price that is not known is no price of nothing."""
    document = two_depots("60", valid_until="2026-02-03")
    document["periods"] = ["2026-02-03", "2026-02-04"]

    with pytest.raises(NetworkRefused, match="tariff_not_valid"):
        plan_network(document)
