"""Freight tariffs at the door: what is kept, what is refused, and what is not built yet."""

import copy
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from service.network.canonical import read_network
from tests.network_samples import check, digest, found, found_after, sound

Change = Callable[[dict[str, Any]], None]
BREAKS = [{"from": "0", "rate": "0.4"}, {"from": "100", "rate": "0.5"}]
RISING: dict[str, Any] = {
    "id": "ROAD",
    "basis": "weight",
    "breaks": BREAKS,
    "break_type": "incremental",
}
# In the sound network only ROAD-25 can use the first lane.
PLACE = "/tariffs/0"
LANE = "/lanes/0/tariff"


def with_tariff(**fields: object) -> Change:
    """Return a change that puts the first lane under a tariff with other ``fields``."""

    def change(document: dict[str, Any]) -> None:
        tariff = RISING | fields
        document["tariffs"] = [{name: value for name, value in tariff.items() if value != ...}]
        document["lanes"][0]["tariff"] = "ROAD"
        del document["lanes"][0]["unit_cost"]

    return change


def under(lane: dict[str, Any], *more: dict[str, Any], **fields: object) -> Change:
    """Return a change that does the same and changes the lane, and adds ``more`` tariffs."""

    def change(document: dict[str, Any]) -> None:
        with_tariff(**fields)(document)
        document["lanes"][0] |= lane
        document["tariffs"] += more

    return change


FAULTS: list[tuple[Change, str, str]] = [
    (with_tariff(), "", ""),
    (lambda document: document.update(tariffs={}), "/tariffs", "wrong_type"),
    (with_tariff(basis=...), f"{PLACE}/basis", "missing_field"),
    (with_tariff(breaks=[]), f"{PLACE}/breaks", "wrong_type"),
    (with_tariff(breaks=BREAKS[1:]), f"{PLACE}/breaks", "breaks_start"),
    (with_tariff(breaks=[*BREAKS, BREAKS[1]]), f"{PLACE}/breaks", "breaks_order"),
    (
        with_tariff(breaks=[{"from": "0", "rate": "-1"}]),
        f"{PLACE}/breaks/0/rate",
        "negative_number",
    ),
    (with_tariff(break_type=...), f"{PLACE}/break_type", "missing_field"),
    (with_tariff(break_type="stepped"), f"{PLACE}/break_type", "bad_choice"),
    (with_tariff(breaks=BREAKS[:1], break_type=...), "", ""),
    (with_tariff(pay_up=True), f"{PLACE}/pay_up", "pay_up"),
    (with_tariff(pay_up="yes"), f"{PLACE}/pay_up", "wrong_type"),
    (with_tariff(kg_per_m3="333"), f"{PLACE}/kg_per_m3", "kg_per_m3"),
    (with_tariff(basis="chargeable_weight"), f"{PLACE}/kg_per_m3", "kg_per_m3"),
    (with_tariff(basis="chargeable_weight", kg_per_m3="333"), "", ""),
    (with_tariff(surcharge_percent="-100"), f"{PLACE}/surcharge_percent", "out_of_range"),
    (with_tariff(surcharge_percent="-99.5"), "", ""),
    (with_tariff(round_up_to="0"), f"{PLACE}/round_up_to", "not_above_zero"),
    (with_tariff(currency="NOK"), f"{PLACE}/currency", "exchange_rate_missing"),
    (with_tariff(currency="EUR"), "", ""),
    (
        with_tariff(valid_from="2026-03-01", valid_until="2026-02-01"),
        f"{PLACE}/valid_until",
        "period_reversed",
    ),
    (with_tariff(discount="1"), f"{PLACE}/discount", "unknown_field"),
    # The orders close on 3 February, which is the day of departure.
    (with_tariff(valid_until="2026-02-02"), LANE, "tariff_not_valid"),
    (with_tariff(valid_from="2026-02-04"), LANE, "tariff_not_valid"),
    (with_tariff(valid_from="2026-02-03", valid_until="2026-02-03"), "", ""),
    (under({}, RISING), "/tariffs/1/id", "tariffs_overlap"),
    (
        under({}, RISING | {"valid_from": "2026-02-03"}, valid_until="2026-02-03"),
        "/tariffs/1/id",
        "tariffs_overlap",
    ),
    (under({}, RISING | {"valid_from": "2026-02-04"}, valid_until="2026-02-03"), "", ""),
    (under({"tariff": "RAIL"}), LANE, "unknown_tariff"),
    (under({"unit_cost": "1"}), LANE, "two_costs"),
    (under({"currency": "EUR"}), "/lanes/0/currency", "currency_of_tariff"),
    (with_tariff(basis="crate"), LANE, "measure_unknown"),
    # What does not only rise waits for choices in whole numbers.
    (
        with_tariff(breaks=[*BREAKS[:1], {"from": "100", "rate": "0.3"}]),
        "/lanes/0/tariff",
        "not_yet",
    ),
    (with_tariff(break_type="all_units"), LANE, "not_yet"),
    (with_tariff(minimum_charge="45"), LANE, "not_yet"),
    (with_tariff(round_up_to="1"), LANE, "not_yet"),
    (with_tariff(round_money="0.5"), LANE, "not_yet"),
    # A bag of 25.2 kg costs 10.08 at least: these bend nothing.
    (with_tariff(minimum_charge="10.08"), "", ""),
    (with_tariff(breaks=BREAKS[:1], round_up_to="0.7", round_money="0.01"), "", ""),
]


@pytest.mark.parametrize(("change", "place", "code"), FAULTS)
def test_each_fault_of_a_tariff_has_its_place(
    change: Change, place: str, code: str, tmp_path: Path
) -> None:
    """One change at a time, and one fault for it; no code: the network stays sound."""
    assert found_after(change, tmp_path) == ([(place, code)] if code else [])


def test_a_faulty_version_of_a_tariff_is_reported_once(tmp_path: Path) -> None:
    """It may be the one that would hold: lanes are not blamed for it."""
    document = sound()
    under({}, RISING | {"valid_from": "2026-02-03", "basis": ""}, valid_until="2026-02-02")(
        document
    )

    assert found(check(document, tmp_path)) == [("/tariffs/1/basis", "bad_id")]


def test_a_lane_needs_a_cost_or_a_tariff(tmp_path: Path) -> None:
    """Beside lanes with tariffs, one with neither is told so."""
    document = sound()
    with_tariff()(document)
    del document["lanes"][1]["unit_cost"]

    assert found(check(document, tmp_path)) == [("/lanes/1/unit_cost", "missing_field")]


def test_items_that_meet_in_a_break_wait_for_shared_limits(tmp_path: Path) -> None:
    """What one of them costs depends on the other; with one rate by weight it does not."""
    document = sound()
    document["lanes"] = [
        {"origin": "Y", "destination": "YARD-07", "tariff": "ROAD", "id": "any item"}
    ]
    document["rules"] = []
    del document["control"]
    document["supply"].append({"site": "Y", "item": "ROAD-25", "quantity": "5"})
    for item in document["items"]:
        if not any(line["item"] == item["id"] for line in document["demand"]):
            document["demand"].append({"site": "YARD-07", "item": item["id"], "quantity": "1"})
    document["tariffs"] = [RISING]
    even = copy.deepcopy(document)
    even["tariffs"][0] |= {"breaks": BREAKS[:1]}

    assert found(check(document, tmp_path)) == [(LANE, "not_yet")]
    assert found(check(even, tmp_path)) == []


def test_a_lane_by_the_tariff_of_another_carrier_is_doubted(tmp_path: Path) -> None:
    """It may be meant: a broker's tariff. More often it is a slip."""
    document = sound()
    under({"carrier": "C-RAIL"}, carrier="C-ROAD")(document)

    report = check(document, tmp_path)

    summary: Any = report.summary
    codes = {caution["code"] for caution in summary["cautions"]}
    assert "tariff_of_another_carrier" in codes


def test_what_a_tariff_says_by_default_is_unsaid(tmp_path: Path) -> None:
    """One digest for both, and for any order of tariffs."""
    document = sound()
    under({}, RISING | {"id": "AIR"}, breaks=BREAKS[:1], break_type=...)(document)
    other = sound()
    under(
        {},
        RISING | {"id": "AIR", "breaks": [one | {"from": one["from"] + ".0"} for one in BREAKS]},
        breaks=BREAKS[:1],
        break_type="all_units",
        pay_up=False,
        minimum_charge="0",
        surcharge_percent=0,
        currency="EUR",
        version=None,
    )(other)
    other["tariffs"].reverse()

    assert digest(document, tmp_path / "a") == digest(other, tmp_path / "b")


def test_tariffs_come_back_from_the_normal_form(tmp_path: Path) -> None:
    """They stand in the head, and lanes name them in a column."""
    document = sound()
    with_tariff(carrier="C-ROAD", surcharge_percent="12.50", version="2026/1")(document)

    digest(document, tmp_path)
    network = read_network(tmp_path / "network.zip")

    assert network.head["tariffs"] == [
        RISING | {"carrier": "C-ROAD", "surcharge_percent": "12.5", "version": "2026/1"}
    ]
    assert network.lanes.tariff.values == ("ROAD",)
    assert (network.lanes.unit_cost.present != (network.lanes.tariff.codes >= 0)).all()
