"""Nothing that the interface names is ignored: it is read, or refused by name.

The lists are the promised fields, rules and options, written here by hand once more, so that one
that is dropped from the code is missed here.
"""

from pathlib import Path
from typing import Any

import pytest

from service.network.not_yet import (
    NOT_YET_FIELDS,
    NOT_YET_OPTIONS,
    NOT_YET_RULES,
)
from service.network.options import read_options
from tests.network_samples import check, found, sound

# The promised fields that are read, required ones first.
FIELDS = {
    "network": "format currency cut_off items sites supply demand lanes "
    "name planned_at release_by shortage_measure periods storage rules control exchange_rates "
    "tariffs extra",
    "items": "id unit name step gtin weight_kg volume_m3 value packs tags extra",
    "sites": "id roles name gln latitude longitude time_zone country handling_cost tags extra",
    "supply": "site item quantity unit unit_cost on_hand reserved on_hold as_of lot best_before "
    "available_from keep currency extra",
    "demand": "site item quantity reference order ordered_at unit priority shortage_cost "
    "worth_at_most earliest due latest late_cost_per_day origins tags extra",
    "lanes": "origin destination unit_cost id item measure must_ship capacity per carrier "
    "transit_days closes departs arrives tags currency charges tariff extra",
}
# Promised for later: dates, charges, commitments and what several items share.
LATER_FIELDS = {
    "network": "committed committed_deducted",
    "items": "divisible",
    "supply": "",
    "demand": "partial split",
    "lanes": "distance_km",
}
RULES = "closure fixed_quantity throughput shared_capacity"
LATER_RULES = (
    "transit_limit commitment source_share cost_limit emissions single_source "
    "complete_or_none minimum_or_none fixed_charge vehicles shipping_multiple"
)
OPTIONS = {
    "shortages": "allow",
    "worth_at_most": "1",
    "demand_rounding": "up",
    "bad_rows": "refuse",
    "deadline_seconds": "60",
    "label": "x",
    "plan_for": "2026-02-03",
    "maximum_age_minutes": "5",
}
LATER_OPTIONS = "fair_shares former_run allowance gap"


def holder(document: dict[str, Any], table: str) -> dict[str, Any]:
    """Return the object of a sound document in which a field of ``table`` stands."""
    place: dict[str, Any] = document if table == "network" else document[table][0]
    return place


def pairs(lists: dict[str, str]) -> list[tuple[str, str]]:
    """Return each table with each of its fields."""
    return [(table, name) for table, names in lists.items() for name in names.split()]


@pytest.mark.parametrize(("table", "name"), pairs(FIELDS))
def test_every_built_field_is_known(table: str, name: str, tmp_path: Path) -> None:
    """Whatever it holds, it is neither unknown nor refused for later."""
    document = sound()
    holder(document, table)[name] = [["no", "such", "value"]]

    codes = {code for _, code in found(check(document, tmp_path))}

    assert codes
    assert not codes & {"unknown_field", "not_yet"}


@pytest.mark.parametrize(("table", "name"), pairs(LATER_FIELDS))
@pytest.mark.parametrize("value", ["x", None])
def test_every_later_field_is_refused_by_name(
    table: str, name: str, value: str | None, tmp_path: Path
) -> None:
    """Also where it is null: whoever sends it expects it to be understood."""
    document = sound()
    holder(document, table)[name] = value

    report = check(document, tmp_path)

    place = f"/{name}" if table == "network" else f"/{table}/0/{name}"
    assert found(report) == [(place, "not_yet")]
    assert f"'{name}'" in report.faults[0].detail


@pytest.mark.parametrize("table", ["supply", "demand", "lanes"])
def test_later_fields_are_refused_in_columns_too(table: str, tmp_path: Path) -> None:
    """The form of a table changes nothing."""
    document = sound()
    rows = document[table]
    document[table] = {
        name: [row.get(name) for row in rows] for name in {name for row in rows for name in row}
    }
    for name in LATER_FIELDS[table].split():
        document[table][name] = [None] * len(rows)

    report = check(document, tmp_path)

    assert {place for place, code in found(report) if code == "not_yet"} == {
        f"/{table}/{name}" for name in LATER_FIELDS[table].split()
    }


@pytest.mark.parametrize("rule", LATER_RULES.split())
def test_every_later_rule_is_refused_by_name(rule: str, tmp_path: Path) -> None:
    """A rule that is dropped in silence is a plan that breaks it."""
    document = sound()
    document["rules"][1] = {"rule": rule, "id": "later", "anything": 1}

    report = check(document, tmp_path)

    assert found(report) == [("/rules/1/rule", "not_yet")]
    assert f"'{rule}'" in report.faults[0].detail


@pytest.mark.parametrize("rule", RULES.split())
def test_every_built_rule_is_known(rule: str, tmp_path: Path) -> None:
    """It asks for its own fields instead."""
    document = sound()
    document["rules"][1] = {"rule": rule, "id": "now"}

    codes = {code for _, code in found(check(document, tmp_path))}

    assert codes <= {"missing_field", "lanes_or_sites"}
    assert codes


def test_every_option_is_read_or_refused_by_name() -> None:
    """Query parameters are input like any other."""
    _, faults = read_options(OPTIONS | dict.fromkeys(LATER_OPTIONS.split(), "1"))

    assert [(fault.pointer, fault.code) for fault in faults] == [
        (f"?{name}", "not_yet") for name in LATER_OPTIONS.split()
    ]


def test_the_table_refuses_nothing_that_is_not_promised() -> None:
    """And each entry names the subject that brings it."""
    fields = {(table, name) for table, names in NOT_YET_FIELDS.items() for name in names} - {
        ("rules", "over")
    }

    assert fields == set(pairs(LATER_FIELDS))
    assert set(NOT_YET_RULES) == set(LATER_RULES.split())
    assert set(NOT_YET_OPTIONS) == set(LATER_OPTIONS.split())
    subjects = [*NOT_YET_RULES.values(), *NOT_YET_OPTIONS.values()]
    assert all(subjects)
