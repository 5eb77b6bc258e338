"""The faults of a network definition: each with its place and code, all at once."""

from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from service.network.options import Options
from tests.network_samples import check, found, sound

Change = Callable[[dict[str, Any]], None]


def put(*path: str | int, value: object) -> Change:
    """Return a change that sets one place of a document."""

    def change(document: Any) -> None:  # noqa: ANN401 - JSON
        for token in path[:-1]:
            document = document[token]
        document[path[-1]] = value

    return change


def drop(*path: str | int) -> Change:
    """Return a change that removes one member."""

    def change(document: Any) -> None:  # noqa: ANN401 - JSON
        for token in path[:-1]:
            document = document[token]
        del document[path[-1]]

    return change


def add(table: str, **row: object) -> Change:
    """Return a change that adds a row."""
    return lambda document: document[table].append(row)


SELF = {"origin": "X", "destination": "X", "unit_cost": "1"}
ROUND = {"origin": "X", "destination": "Y", "unit_cost": "-1"}
NOON, EVENING = "2026-02-03T12:00:00+01:00", "2026-02-03T18:00:00+01:00"
LATE = "late_cost_per_day"
LINE = sound()["demand"][0]


def departure(**times: object) -> Change:
    """Return a change that gives the first lane some times."""

    def change(document: dict[str, Any]) -> None:
        document["lanes"][0] |= times

    return change


FAULTS: list[tuple[Change, str, str]] = [
    # The head.
    (put("format", value=2), "/format", "unknown_format"),
    (put("format", value="1"), "/format", "unknown_format"),
    (drop("format"), "/format", "missing_field"),
    (put("currency", value="EURO"), "/currency", "unknown_currency"),
    (put("currency", value="XAU"), "/currency", "unknown_currency"),
    (put("cut_off", value="2026-02-03T16:00:00"), "/cut_off", "bad_time"),
    (put("cut_off", value="1985-02-29T00:00:00Z"), "/cut_off", "bad_time"),
    (put("cut_off", value="2016-12-31T23:59:60Z"), "/cut_off", "bad_time"),
    (put("release_by", value=5), "/release_by", "wrong_type"),
    (put("name", value="a\tb"), "/name", "bad_text"),
    (put("name", value=None), "", ""),
    (put("strange", value=1), "/strange", "unknown_field"),
    (put("planned_at", value="noon"), "/planned_at", "bad_time"),
    (put("periods", value=["2026-02-03", "2026-02-05"]), "", ""),
    (put("periods", value=["2026-02-03", "2026-02-03"]), "/periods", "bad_periods"),
    (put("periods", value=["2026-02-02"]), "/periods", "periods_over"),
    (put("extra", value={str(n): "" for n in range(17)}), "/extra", "bad_extra"),
    (put("extra", value={str(n): "" for n in range(1, 17)}), "", ""),
    (put("extra", value={"a": 1}), "/extra", "bad_extra"),
    (drop("items"), "/items", "missing_field"),
    (drop("lanes"), "/lanes", "missing_field"),
    (put("sites", value={}), "/sites", "wrong_type"),
    (put("demand", value="x"), "/demand", "wrong_type"),
    # Items.
    (put("items", 0, "id", value=7), "/items/0/id", "wrong_type"),
    (put("items", 0, "id", value=""), "/items/0/id", "bad_id"),
    (put("items", 0, "step", value="0"), "/items/0/step", "not_above_zero"),
    (put("items", 0, "step", value="0.0001"), "/items/0/step", "too_many_decimals"),
    (put("items", 0, "gtin", value="6291041500214"), "/items/0/gtin", "bad_gtin"),
    (put("items", 0, "gtin", value="6291041500213"), "", ""),
    (put("items", 0, "weight_kg", value=True), "/items/0/weight_kg", "wrong_type"),
    (put("items", 0, "weight_kg", value="-1"), "/items/0/weight_kg", "negative_number"),
    (put("items", 0, "volume_m3", value="1e-3"), "/items/0/volume_m3", "not_a_number"),
    (put("items", 0, "packs", 0, "unit", value="bag"), "/items/0/packs/0/unit", "bad_pack"),
    (put("items", 0, "packs", 0, "unit", value="weight_kg"), "/items/0/packs/0/unit", "bad_pack"),
    (put("items", 1, "id", value="ROAD-25"), "/items/1/id", "duplicate_id"),
    # Sites.
    (put("sites", 0, "roles", value=[]), "/sites/0/roles", "bad_roles"),
    (put("sites", 0, "roles", value=["depot"]), "/sites/0/roles", "bad_roles"),
    (put("sites", 0, "gln", value="6291041500214"), "/sites/0/gln", "bad_gln"),
    (put("sites", 0, "gln", value="6291041500213"), "", ""),
    (put("sites", 0, "latitude", value="90.000001"), "/sites/0/latitude", "out_of_range"),
    (put("sites", 0, "longitude", value=-180), "", ""),
    (put("sites", 0, "time_zone", value="Europe"), "/sites/0/time_zone", "unknown_time_zone"),
    (put("sites", 0, "time_zone", value="../etc"), "/sites/0/time_zone", "unknown_time_zone"),
    (put("sites", 0, "time_zone", value="Mars/Base"), "/sites/0/time_zone", "unknown_time_zone"),
    (put("sites", 0, "country", value="no"), "/sites/0/country", "bad_country"),
    (put("sites", 0, "tags", value=["a", "a"]), "/sites/0/tags", "wrong_type"),
    (put("sites", 1, "handling_cost", "Z", value=1), "/sites/1/handling_cost/Z", "unknown_item"),
    (put("sites", 0, "handling_cost", value="-0.04"), "", ""),
    # Supply.
    (put("supply", 0, "site", value="NOWHERE"), "/supply/0/site", "unknown_site"),
    (put("supply", 0, "site", value="X"), "/supply/0/site", "role_missing"),
    (put("supply", 0, "item", value="PEPPER"), "/supply/0/item", "unknown_item"),
    (drop("supply", 0, "quantity"), "/supply/0/quantity", "missing_field"),
    (put("supply", 0, "quantity", value="3199"), "/supply/0/quantity", "stock_does_not_add_up"),
    (put("supply", 0, "on_hold", value="100"), "/supply/0/quantity", "stock_does_not_add_up"),
    (drop("supply", 0, "on_hand"), "/supply/0/reserved", "on_hand_missing"),
    (put("supply", 1, "quantity", value="-1"), "/supply/1/quantity", "negative_number"),
    (put("supply", 1, "unit", value="kg"), "/supply/1/unit", "unknown_unit"),
    (put("supply", 1, "best_before", value="2026-02-30"), "/supply/1/best_before", "bad_date"),
    (put("supply", 1, "as_of", value="yesterday"), "/supply/1/as_of", "bad_time"),
    (put("supply", 1, "available_from", value="x"), "/supply/1/available_from", "bad_date"),
    (put("supply", 0, "keep", value=10), "/supply/0/keep", "bad_keep"),
    (put("supply", 0, "keep", value={}), "/supply/0/keep/quantity", "missing_field"),
    (put("supply", 0, "keep", "priority", value=10), "/supply/0/keep/priority", "bad_number"),
    (put("supply", 0, "keep", "quantity", value="x"), "/supply/0/keep/quantity", "not_a_number"),
    (
        add("supply", site="DEP-NORTH", item="ROAD-25", quantity=1, keep={"quantity": 0.0}),
        "",
        "",
    ),
    (
        add("supply", site="DEP-NORTH", item="ROAD-25", quantity=1, keep={"quantity": 1}),
        "/supply/2/keep",
        "keep_twice",
    ),
    # Order lines.
    (put("demand", 0, "site", value="X"), "/demand/0/site", "role_missing"),
    (put("demand", 0, "quantity", value="880.5"), "/demand/0/quantity", "off_step"),
    (put("demand", 0, "priority", value=0), "/demand/0/priority", "bad_number"),
    (put("demand", 0, "priority", value=10), "/demand/0/priority", "bad_number"),
    (put("demand", 0, "priority", value="2"), "/demand/0/priority", "bad_number"),
    (put("demand", 0, "shortage_cost", value="1"), "/demand/0/shortage_cost", "two_kinds_of_imp"),
    (put("demand", 1, "shortage_cost", value=1), "/demand/1/worth_at_most", "two_kinds_of_imp"),
    (put("demand", 1, "worth_at_most", value=-1), "/demand/1/worth_at_most", "negative_number"),
    (put("demand", 1, "origins", value=[]), "/demand/1/origins", "empty_list"),
    (put("demand", 1, "origins", value=["Z"]), "/demand/1/origins", "unknown_site"),
    (put("demand", 1, "reference", value="SO-10077/1"), "/demand/0/reference", "duplicate_ref"),
    (put("demand", 0, "reference", value="#2"), "/demand/0/reference", "duplicate_reference"),
    (put("demand", 0, "reference", value="a\x00"), "/demand/0/reference", "bad_id"),
    (put("demand", 0, "reference", value="r" * 65), "/demand/0/reference", "bad_id"),
    (put("demand", 0, "due", value="2026-02-05"), "", ""),
    (put("demand", 0, "due", value="2026-2-5"), "/demand/0/due", "bad_date"),
    (put("demand", 0, "latest", value="2026-02-03"), "", ""),
    (put("demand", 0, "latest", value="2026-02-02"), "/demand/0/latest", "latest_before_cut_off"),
    (
        put("demand", 0, value=LINE | {"earliest": "2026-02-06", "latest": "2026-02-05"}),
        "/demand/0/latest",
        "window_reversed",
    ),
    (put("demand", 0, LATE, value="1"), f"/demand/0/{LATE}", "due_missing"),
    (put("demand", 0, "colour", value="red"), "/demand/0/colour", "unknown_field"),
    (put("demand", 0, "extra", value={"": "x"}), "/demand/0/extra", "bad_extra"),
    (put("demand", 0, value=5), "/demand/0", "wrong_type"),
    # Lanes.
    (put("lanes", 0, "origin", value="YARD-07"), "/lanes/0/origin", "role_missing"),
    (put("lanes", 0, "destination", value="NOWHERE"), "/lanes/0/destination", "unknown_site"),
    (add("lanes", **SELF), "/lanes/4/destination", "lane_to_itself"),
    (put("lanes", 0, "unit_cost", value="0.2150000"), "/lanes/0/unit_cost", "too_many_decimals"),
    (put("lanes", 0, "unit_cost", value=[]), "/lanes/0/unit_cost", "wrong_type"),
    (drop("lanes", 0, "unit_cost"), "/lanes/0/unit_cost", "missing_field"),
    (put("lanes", 0, "must_ship", value=2001), "/lanes/0/must_ship", "must_ship_above_capacity"),
    (put("lanes", 0, "must_ship", value="0.5"), "/lanes/0/must_ship", "off_step"),
    (put("lanes", 0, "measure", value="stack"), "/lanes/0/measure", "measure_unknown"),
    (put("lanes", 0, "measure", value="pallet"), "", ""),
    (put("lanes", 0, "per", value="all"), "/lanes/0/per", "bad_choice"),
    (put("lanes", 1, "per", value="each"), "/lanes/1/per", "bad_choice"),
    (put("lanes", 0, "transit_days", value=1), "", ""),
    (put("lanes", 0, "transit_days", value="1.5"), "/lanes/0/transit_days", "too_many_decimals"),
    (put("lanes", 0, "transit_days", value=367), "/lanes/0/transit_days", "transit_too_long"),
    (put("lanes", 0, "departs", value="x"), "/lanes/0/departs", "bad_time"),
    (put("lanes", 0, "departs", value="2026-02-03T18:00:00"), "/lanes/0/departs", "bad_time"),
    (put("lanes", 0, "arrives", value=EVENING), "/lanes/0/arrives", "departs_missing"),
    (put("lanes", 0, "closes", value=EVENING), "/lanes/0/closes", "departs_missing"),
    (departure(departs=EVENING, arrives=NOON), "/lanes/0/arrives", "arrives_before_departs"),
    (departure(departs=NOON, closes=EVENING), "/lanes/0/closes", "closes_after_departs"),
    (
        departure(departs=NOON, arrives=EVENING, transit_days=1),
        "/lanes/0/transit_days",
        "two_arrivals",
    ),
    (put("lanes", 1, "id", value="L1"), "/lanes/0/id", "duplicate_id"),
    (put("lanes", 0, "id", value="X>YARD-07"), "/lanes/0/id", "lane_name_taken"),
    (put("lanes", 3, "unit_cost", value="0.10"), "/lanes/3", "identical_lanes"),
    (add("lanes", **ROUND), "/lanes/4/unit_cost", "loop_below_zero"),
    # Rules.
    (put("rules", value={}), "/rules", "wrong_type"),
    (put("rules", 0, "rule", value="speed_limit"), "/rules/0/rule", "unknown_rule"),
    (put("rules", 0, "rule", value="single_source"), "/rules/0/rule", "not_yet"),
    (put("rules", 0, "over", value="horizon"), "/rules/0/over", "not_yet"),
    (put("rules", 0, "per", value="all"), "/rules/0/per", "bad_choice"),
    (put("rules", 0, "flow", value="lost"), "/rules/0/flow", "bad_choice"),
    (put("rules", 0, "maximum", value="-1"), "/rules/0/maximum", "negative_number"),
    (put("rules", 0, "sites", "colour", value=["red"]), "/rules/0/sites/colour", "unknown_field"),
    (put("rules", 0, "sites", "ids", value=[]), "/rules/0/sites/ids", "empty_list"),
    (put("rules", 0, "sites", "ids", value="X"), "/rules/0/sites/ids", "wrong_type"),
    (put("rules", 0, "sites", value={"role": ["x"]}), "/rules/0/sites/role", "bad_roles"),
    (put("rules", 0, "measure", value="pallet"), "/rules/0/measure", "measure_unknown"),
    (put("rules", 0, "sites", value={}), "/rules/0/per", "per_missing"),
    (put("rules", 1, "id", value="dock"), "/rules/1/id", "duplicate_id"),
    (put("rules", 1, "until", value="2026-02-28"), "/rules/1", "period_reversed"),
    (put("rules", 1, "sites", value={}), "/rules/1", "lanes_or_sites"),
    (drop("rules", 1, "lanes"), "/rules/1", "lanes_or_sites"),
    # Control totals.
    (put("control", "demand_rows", value=3), "/control/demand_rows", "control_mismatch"),
    (put("control", "demand_quantity", value="882.4"), "/control/demand_quantity", "control_mism"),
    (put("control", "supply_rows", value=2), "", ""),
    (put("control", "supply_quantity", value="3201.3"), "", ""),
    (put("control", "supply_quantity", value=3200), "/control/supply_quantity", "control_mismatch"),
    (put("control", "lane_rows", value=-1), "/control/lane_rows", "bad_number"),
    (put("control", "extract_id", value="E-1"), "", ""),
    (put("control", "extracted_at", value="x"), "/control/extracted_at", "bad_time"),
    (put("control", "sum", value=1), "/control/sum", "unknown_field"),
]


@pytest.mark.parametrize(
    ("change", "place", "code"),
    FAULTS,
    ids=[f"{number}{place}" for number, (_, place, _) in enumerate(FAULTS)],
)
def test_each_mistake_is_found_where_it_is(
    change: Change, place: str, code: str, tmp_path: Path
) -> None:
    """A pointer, a stable code, and no word about what is right.

    Cases without a place are sound: the limits themselves are allowed.
    """
    document = sound()
    change(document)

    report = check(document, tmp_path)

    if not place:
        assert found(report) == []
        return
    first = next(entry for entry in found(report) if entry[0] == place)
    assert first[1].startswith(code)
    assert report.status == "invalid"
    assert not (tmp_path / "network.zip").exists()


def test_the_sound_network_is_accepted(tmp_path: Path) -> None:
    """Without it, the test above would prove nothing."""
    assert found(check(sound(), tmp_path)) == []


def test_all_mistakes_are_reported_at_once(tmp_path: Path) -> None:
    """A client mends a network in one go, not one fault a day."""
    document = sound()
    document["strange"] = 1
    document["items"][0]["gtin"] = "6291041500214"
    document["supply"][1]["quantity"] = "x"
    document["demand"][1]["site"] = "NOWHERE"
    document["lanes"].append(dict(ROUND))
    document["lanes"][3]["unit_cost"] = "0.1"
    document["rules"][1]["rule"] = "vehicles"

    places = {place for place, _ in found(check(document, tmp_path))}

    assert places >= {
        "/strange",
        "/items/0/gtin",
        "/supply/1/quantity",
        "/demand/1/site",
        "/lanes/3",
        "/rules/1/rule",
    }


def test_a_refused_item_does_not_blame_what_refers_to_it(tmp_path: Path) -> None:
    """One mistake is one fault: the item is known, it only has a wrong step."""
    document = sound()
    document["items"][0]["step"] = "0"

    assert found(check(document, tmp_path)) == [("/items/0/step", "not_above_zero")]


def test_a_hundred_faults_are_shown_and_all_are_counted(tmp_path: Path) -> None:
    """The first hundred in the order of the document, and how many there are in all."""
    document = sound()
    document["demand"] = [
        {"site": "YARD-07", "item": "BRINE", "quantity": "0.3"} for _ in range(250)
    ]
    del document["control"]

    report = check(document, tmp_path)

    assert report.fault_count == 250
    assert [fault.pointer for fault in report.faults] == [
        f"/demand/{row}/quantity" for row in range(100)
    ]


def test_rounding_on_request_accepts_quantities_off_the_step(tmp_path: Path) -> None:
    """The option decides; the network and its digest stay as sent."""
    document = sound()
    document["demand"][0]["quantity"] = "880.5"
    document["control"]["demand_quantity"] = "883"

    report = check(document, tmp_path, Options(demand_rounding="up"))

    assert found(report) == []


def test_a_body_that_is_no_object_is_refused(tmp_path: Path) -> None:
    """An array of networks is not a network."""
    assert found(check([sound()], tmp_path)) == [("", "wrong_type")]
    assert found(check(b"null", tmp_path)) == [("", "wrong_type")]


@pytest.mark.parametrize(
    "roles",
    [
        ["warehouse"],
        ["ship_to", "cross_dock"],
        ["warehouse", "cross_dock", "ship_to"],
        ["ship_to", "ship_to"],
        ["depot"],
        [],
        [1],
        [["warehouse"]],
        "warehouse",
        None,
    ],
)
@pytest.mark.parametrize("identifier", ["S", "", "x" * 65, "a\tb", "DEP-NORTH", 5, None])
def test_a_site_that_says_little_is_read_as_any_other(
    roles: object, identifier: object, tmp_path: Path
) -> None:
    """Sites with nothing but id and roles are many, and read on a way of their own."""
    reports = []
    for number, more in enumerate(({}, {"name": None})):
        document = sound()
        document["sites"].append({"id": identifier, "roles": roles, **more})
        report = check(document, tmp_path / str(number))
        reports.append((report.faults, report.summary and report.summary["network_digest"]))

    assert reports[0] == reports[1]
