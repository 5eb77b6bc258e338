"""Doubts: each is raised where it should be, and not where it should not."""

from pathlib import Path
from typing import Any

import pytest

from service.network.options import Options
from tests.network_samples import check, doubted, found, sound


def cautions(document: dict[str, Any], tmp_path: Path, options: Options | None = None) -> Any:  # noqa: ANN401 - JSON
    """Return the cautions of a document by code."""
    return doubted(check(document, tmp_path, options))


def test_the_sound_network_has_one_doubt(tmp_path: Path) -> None:
    """Its spring closure has not begun; everything below adds to that."""
    assert set(cautions(sound(), tmp_path)) == {"rule_not_begun"}


def test_a_plan_that_is_needed_before_orders_close_is_doubted(tmp_path: Path) -> None:
    """Two hours of a time zone are easily mixed up; equal times are fine."""
    document = sound() | {"release_by": "2026-02-03T14:59:59Z"}

    assert "release_before_cut_off" in cautions(document, tmp_path / "a")
    document["release_by"] = "2026-02-03T15:00:00Z"
    assert "release_before_cut_off" not in cautions(document, tmp_path / "b")


def test_a_forced_lane_that_no_item_can_use_is_doubted(tmp_path: Path) -> None:
    """Nothing can be forced there, and whoever wrote it expects something to move."""
    document = sound()
    document["supply"].pop(1)
    document["demand"].pop(1)
    document["rules"] = []
    del document["control"]
    document["lanes"][1] |= {"must_ship": "6"}

    caution = cautions(document, tmp_path)["must_ship_without_item"]

    assert caution["examples"] == [{"pointer": "/lanes/1/must_ship", "value": "6"}]


def test_an_order_line_over_nothing_is_doubted(tmp_path: Path) -> None:
    """It is kept, with quantity 0."""
    document = sound()
    document["demand"][0]["quantity"] = "0"
    del document["control"]

    assert cautions(document, tmp_path)["demand_zero"]["examples"] == [
        {"pointer": "/demand/0/quantity", "value": "0"}
    ]


def test_demand_that_nothing_reaches_is_doubted(tmp_path: Path) -> None:
    """No usable lane ends there and no stock lies there; stock on the spot is enough."""
    document = sound()
    document["sites"].append({"id": "FAR", "roles": ["ship_to", "warehouse"]})
    document["demand"].append({"site": "FAR", "item": "ROAD-25", "quantity": "1"})
    del document["control"]

    caution = cautions(document, tmp_path / "a")["demand_not_reached"]

    assert caution["examples"] == [{"pointer": "/demand/2/site", "value": "FAR"}]
    document["supply"].append({"site": "FAR", "item": "ROAD-25", "quantity": "1"})
    assert not {"demand_not_reached", "supply_not_sent"} & set(cautions(document, tmp_path / "b"))


def test_supply_that_nothing_leaves_is_doubted(tmp_path: Path) -> None:
    """Salt at Y: no lane of salt begins there, and lanes for any item reach no demand of it."""
    document = sound()
    document["supply"].append({"site": "Y", "item": "ROAD-25", "quantity": "1"})
    document["demand"][0]["site"] = "YARD-07"
    document["lanes"].pop(1)
    document["control"].pop("lane_rows")

    caution = cautions(document, tmp_path)["supply_not_sent"]

    assert caution["count"] == 2
    assert caution["examples"][-1] == {"pointer": "/supply/2/site", "value": "Y"}


def test_stock_off_the_step_is_doubted(tmp_path: Path) -> None:
    """It is rounded down with the other stock of its cost."""
    document = sound()
    document["supply"][1]["quantity"] = "1.3003"
    assert found(check(document, tmp_path / "a")) == [("/supply/1/quantity", "too_many_decimals")]
    document["supply"][1] |= {"quantity": "1300.3", "unit": "l", "keep": {"quantity": "0.7"}}

    codes = cautions(document, tmp_path / "b")

    assert codes["supply_off_step"]["examples"] == [
        {"pointer": "/supply/1/quantity", "value": "1300.3"}
    ]
    assert codes["keep_off_step"]["count"] == 1


def test_a_rate_far_above_its_carriers_median_is_doubted(tmp_path: Path) -> None:
    """A decimal point in the wrong place is 10 or 100 times; the median is not moved by it."""
    document = sound()
    document["control"].pop("lane_rows")
    rates = ["1", "2", "3", "199.999", "200"]
    document["lanes"] += [
        {"id": f"R{place}", "origin": "X", "destination": "YARD-07", "unit_cost": rate}
        | {"carrier": "C-ROAD"}
        for place, rate in enumerate(["1.5", "2", *rates])
    ]

    caution = cautions(document, tmp_path)["rate_out_of_line"]

    # Sorted: 1, 1.5, 2, 2, 3, 199.999, 200: the median is 2, a hundred times are 200.
    assert caution["examples"] == [{"pointer": "/lanes/10/unit_cost", "value": "200"}]


def test_a_rate_for_items_in_unlike_units_is_doubted(tmp_path: Path) -> None:
    """A bag and a litre at one rate a unit is seldom meant; a stated measure settles it."""
    document = sound()
    document["lanes"].append({"origin": "DEP-NORTH", "destination": "X", "unit_cost": "1"})
    document["rules"] = []
    document["control"].pop("lane_rows")

    caution = cautions(document, tmp_path / "a")["rate_for_unlike_units"]

    assert [example["pointer"] for example in caution["examples"]] == [
        "/lanes/2/unit_cost",
        "/lanes/3/unit_cost",
    ]
    for lane in document["lanes"][2:4]:
        lane["measure"] = "weight_kg"
    assert "rate_for_unlike_units" not in cautions(document, tmp_path / "b")


def test_a_limit_for_any_item_must_say_whom_it_limits(tmp_path: Path) -> None:
    """To leave it out is an error once more than one item can use the lane."""
    document = sound()
    document["lanes"][2]["capacity"] = "10"
    document["rules"] = []
    document["control"].pop("lane_rows")
    assert found(check(document, tmp_path / "one item")) == []

    document["lanes"].append({"origin": "DEP-NORTH", "destination": "X", "unit_cost": "1"})

    assert found(check(document, tmp_path / "two")) == [("/lanes/2/capacity", "per_missing")]


def test_a_lane_for_any_item_needs_a_measure_that_its_items_have(tmp_path: Path) -> None:
    """Nobody knows the volume of brine here."""
    document = sound()
    document["lanes"][1]["measure"] = "volume_m3"

    assert found(check(document, tmp_path)) == [("/lanes/1/measure", "measure_unknown")]


def test_what_must_go_on_a_lane_for_any_item_is_whole_steps_of_each(tmp_path: Path) -> None:
    """Half a litre of brine weighs 0.6 kg."""
    document = sound()
    document["lanes"][1]["must_ship"] = "0.6"
    assert found(check(document, tmp_path / "a")) == []

    document["lanes"][1]["must_ship"] = "0.7"

    assert found(check(document, tmp_path / "b")) == [("/lanes/1/must_ship", "off_step")]


@pytest.mark.parametrize(
    ("as_of", "age", "outcome"),
    [
        ("2026-02-03T15:00:00+01:00", 60, "fresh"),
        ("2026-02-03T14:59:59.999999999+01:00", 60, "stock_too_old"),
        ("2026-02-03T15:00:00+01:00", None, "fresh"),
        ("0001-01-02T00:00:00Z", 60, "stock_too_old"),
        ("9999-12-30T00:00:00Z", 10, "fresh"),
        (None, 60, "stock_age_unknown"),
    ],
)
def test_the_age_of_stock_is_checked_at_the_cut_off(
    as_of: str | None, age: int | None, outcome: str, tmp_path: Path
) -> None:
    """Older than the option allows is an error; unknown is a doubt."""
    document = sound()
    document["supply"][0]["as_of"] = as_of

    report = check(document, tmp_path, Options(maximum_age_minutes=age))

    if outcome == "stock_too_old":
        assert found(report) == [("/supply/0/as_of", "stock_too_old")]
    else:
        assert ("stock_age_unknown" in doubted(report)) == (outcome == "stock_age_unknown")


def test_stock_older_than_the_newest_order_line_is_doubted(tmp_path: Path) -> None:
    """It may already be promised to somebody."""
    document = sound()
    document["demand"][0]["ordered_at"] = "2026-02-03T14:52:00.000000001Z"

    caution = cautions(document, tmp_path)["stock_older_than_orders"]

    assert [example["pointer"] for example in caution["examples"]] == ["/supply/0/as_of"]


def test_origins_behind_a_cross_dock_must_be_named_all_or_none(tmp_path: Path) -> None:
    """What comes through X is stock of Y and of Z, and nobody can tell them apart there."""
    document = sound()
    document["sites"].append({"id": "Z", "roles": ["warehouse"]})
    document["supply"].append({"site": "Z", "item": "BRINE", "quantity": "1"})
    document["lanes"].append({"origin": "Z", "destination": "X", "unit_cost": "1", "item": "BRINE"})
    document["rules"] = []
    document["control"].pop("lane_rows")

    assert found(check(document, tmp_path / "some")) == [
        ("/demand/1/origins", "origins_behind_cross_dock")
    ]
    document["demand"][1]["origins"] = ["Z", "Y"]
    assert found(check(document, tmp_path / "all")) == []
    document["demand"][1]["origins"] = ["DEP-NORTH"]
    assert found(check(document, tmp_path / "none")) == []
    document["demand"][1]["origins"] = ["Y"]
    document["supply"][2]["quantity"] = "0"
    assert found(check(document, tmp_path / "empty stock")) == []
