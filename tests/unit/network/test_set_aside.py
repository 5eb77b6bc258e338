"""Order lines that cannot be read are set aside on request, and only they."""

from pathlib import Path
from typing import Any

from service.network.options import Options
from tests.network_samples import check, found, sound


def test_bad_order_lines_are_set_aside_on_request(tmp_path: Path) -> None:
    """The rest is planned; what was left out is listed with its faults, and counts in totals."""
    document = sound()
    line = {"reference": "BAD", "site": "NOWHERE", "item": "BRINE", "quantity": "1.3"}
    document["demand"].insert(0, line)
    document["demand"] += [dict(line, site="YARD-07", reference="TWICE", quantity=1)] * 2
    document["control"] |= {"demand_rows": 5, "demand_quantity": "885.8"}

    report = check(document, tmp_path, Options(bad_rows="set_aside"))

    assert found(report) == []
    assert report.summary is not None
    listed: Any = report.summary["set_aside"]
    assert [(entry["pointer"], entry["reference"]) for entry in listed] == [
        ("/demand/0", "BAD"),
        ("/demand/3", "TWICE"),
        ("/demand/4", "TWICE"),
    ]
    assert [error["code"] for error in listed[0]["errors"]] == ["unknown_site", "off_step"]
    assert report.summary["counts"] == {
        "items": 2,
        "sites": 4,
        "supply_rows": 2,
        "demand_rows": 2,
        "lanes": 4,
    }


def test_an_order_line_that_cannot_be_counted_breaks_the_control_total(tmp_path: Path) -> None:
    """Nobody can confirm a sum with an unreadable part, set aside or not."""
    document = sound()
    document["demand"][0]["quantity"] = "many"

    report = check(document, tmp_path, Options(bad_rows="set_aside"))

    assert found(report) == [("/control/demand_quantity", "control_mismatch")]
    assert "could not be read" in report.faults[0].detail


def test_a_missing_column_is_one_fault_even_if_bad_rows_are_set_aside(tmp_path: Path) -> None:
    """Setting every line aside would plan nothing and call it done."""
    document = sound()
    document["demand"] = {"site": ["YARD-07", "YARD-07"], "quantity": [1, 2]}
    del document["control"]

    report = check(document, tmp_path, Options(bad_rows="set_aside"))

    assert found(report) == [("/demand/item", "missing_field")]
