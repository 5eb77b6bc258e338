"""Rules: what they pick, when they hold, and the normal form they are kept in."""

from fractions import Fraction
from pathlib import Path
from typing import Any

import pytest

from service.network.canonical import read_network
from service.network.columns import Network
from service.network.naming import lane_names
from service.network.rules import (
    Closure,
    FixedQuantity,
    ItemSelector,
    Throughput,
    in_force,
    items_selected,
    lanes_selected,
    rule_of,
    rules_of,
    sites_selected,
)
from tests.network_samples import check, doubted, found, sound


def network(tmp_path: Path, *rules: dict[str, Any]) -> Network:
    """Return the sound network with some tags and these rules."""
    document = sound()
    document["lanes"][1]["tags"] = ["night", "ferry"]
    document["lanes"][2] |= {"tags": ["night"], "carrier": "C-ROAD"}
    document["rules"] = list(rules)
    assert found(check(document, tmp_path)) == []
    return read_network(tmp_path / "network.zip")


@pytest.mark.parametrize(
    ("selector", "names"),
    [
        ({}, {"L1", "Y>X", "X>YARD-07", "X>YARD-07#2"}),
        ({"ids": ["L1", "X>YARD-07#2", "nowhere"]}, {"L1", "X>YARD-07#2"}),
        ({"origin": ["X", "DEP-NORTH"]}, {"L1", "X>YARD-07", "X>YARD-07#2"}),
        ({"destination": ["X"]}, {"Y>X"}),
        # Without a carrier comes first, so that the lane of C-ROAD is the second of its way.
        ({"carrier": ["C-RAIL", "C-ROAD"]}, {"L1", "X>YARD-07#2"}),
        ({"tag": ["ferry"]}, {"Y>X"}),
        ({"tag": ["night"], "origin": ["X"]}, {"X>YARD-07#2"}),
        ({"carrier": ["C-RAIL"], "origin": ["X"]}, set()),
    ],
)
def test_keys_of_a_selector_are_joined_by_and_values_by_or(
    selector: dict[str, Any], names: set[str], tmp_path: Path
) -> None:
    """Every key narrows, every value widens; an empty selector means all."""
    found_network = network(tmp_path, {"rule": "closure", "id": "c", "lanes": selector})
    (rule,) = rules_of(found_network)

    picked = lanes_selected(found_network, rule)

    assert set(lane_names(found_network, picked.nonzero()[0])) == names


def test_a_closed_site_closes_its_lanes(tmp_path: Path) -> None:
    """Every lane from or to it; the site itself is picked as well."""
    found_network = network(
        tmp_path, {"rule": "closure", "id": "c", "sites": {"role": ["warehouse"], "ids": ["Y"]}}
    )
    (rule,) = rules_of(found_network)

    lanes = lanes_selected(found_network, rule)
    sites = sites_selected(found_network, rule)

    assert lane_names(found_network, lanes.nonzero()[0]) == ["Y>X"]
    assert [found_network.sites[place].id for place in sites.nonzero()[0]] == ["Y"]


def test_items_narrow_a_rule(tmp_path: Path) -> None:
    """By id or tag; without a selector a rule is about all items."""
    closed = {"rule": "closure", "lanes": {}}
    found_network = network(
        tmp_path,
        closed | {"id": "a", "items": {"tag": ["dry"]}},
        closed | {"id": "b", "items": {"ids": ["BRINE", "PEPPER"]}},
        closed | {"id": "c"},
    )

    picked = [
        [item.id for item, flag in zip(found_network.items, flags, strict=True) if flag]
        for flags in (items_selected(found_network, rule) for rule in rules_of(found_network))
    ]

    assert picked == [["ROAD-25"], ["BRINE"], ["BRINE", "ROAD-25"]]


@pytest.mark.parametrize(
    ("starts", "ends", "holds"),
    [
        (None, None, True),
        ("2026-02-03", "2026-02-03", True),
        ("2026-02-04", None, False),
        (None, "2026-02-02", False),
    ],
)
def test_a_rule_holds_on_the_local_date_of_the_cut_off(
    starts: str | None, ends: str | None, *, holds: bool
) -> None:
    """Both dates are inclusive; in UTC this cut-off is already on the fourth."""
    document: dict[str, Any] = {
        "rule": "closure",
        "id": "c",
        "lanes": {},
        "from": starts,
        "until": ends,
    }
    rule = rule_of({key: value for key, value in document.items() if value is not None})

    assert in_force(rule, "2026-02-03T23:30:00-05:00") is holds


def test_rules_are_kept_in_their_normal_form(tmp_path: Path) -> None:
    """Sorted by id, selectors sorted, decimals as text, defaults left out."""
    found_network = network(
        tmp_path,
        {
            "rule": "throughput",
            "id": "z",
            "sites": {"ids": ["X"]},
            "items": {"ids": ["BRINE"]},
            "flow": "through",
            "measure": "weight_kg",
            "maximum": 10.500,
            "per": "each",
            "note": "two\nlines",
        },
        {
            "rule": "fixed_quantity",
            "id": "a",
            "lanes": {"ids": ["X>YARD-07#2", "L1"]},
            "quantity": 1,
            "owner": "yard",
            "until": "2026-02-03",
        },
    )

    assert found_network.head["rules"] == [
        {
            "rule": "fixed_quantity",
            "id": "a",
            "owner": "yard",
            "until": "2026-02-03",
            "lanes": {"ids": ["L1", "X>YARD-07#2"]},
            "quantity": "1",
        },
        {
            "rule": "throughput",
            "id": "z",
            "note": "two\nlines",
            "items": {"ids": ["BRINE"]},
            "sites": {"ids": ["X"]},
            "flow": "through",
            "measure": "weight_kg",
            "maximum": "10.5",
        },
    ]
    fixed, limit = rules_of(found_network)
    assert isinstance(fixed, FixedQuantity)
    assert isinstance(limit, Throughput)
    assert (fixed.quantity, fixed.ends) == (Fraction(1), "2026-02-03")
    assert (limit.per, limit.items) == ("each", ItemSelector(ids=("BRINE",)))


def test_a_rule_of_a_later_version_is_not_read_as_another() -> None:
    """A verifier that meets an unknown rule must stop, not skip it."""
    with pytest.raises(ValueError, match="no rule of this format"):
        rule_of({"rule": "vehicles", "id": "v"})
    assert isinstance(rule_of({"rule": "closure", "id": "c", "lanes": {}}), Closure)


def report_of(tmp_path: Path, *rules: dict[str, Any], **changes: Any) -> Any:  # noqa: ANN401 - JSON
    """Return the report on the sound network with these rules."""
    document = sound() | changes
    document["rules"] = [{"id": f"r{place}", **rule} for place, rule in enumerate(rules)]
    return check(document, tmp_path)


FIXED = {"rule": "fixed_quantity", "lanes": {"ids": ["X>YARD-07"]}, "quantity": "1"}
LIMIT = {"rule": "throughput", "sites": {"ids": ["X"]}, "flow": "received", "maximum": "5"}


@pytest.mark.parametrize(
    ("rules", "faults"),
    [
        ([FIXED, FIXED], []),
        ([FIXED, FIXED | {"quantity": "2"}], [("/rules/1/quantity", "rules_contradict")]),
        ([FIXED, FIXED | {"quantity": "2", "until": "2026-01-01"}], []),
        ([FIXED, FIXED | {"quantity": "2", "items": {"ids": ["ROAD-25"]}}], []),
        ([FIXED | {"quantity": "0.3"}], [("/rules/0/quantity", "off_step")]),
        (
            [FIXED | {"quantity": "0.3", "lanes": {"ids": ["L1"]}}],
            [("/rules/0/quantity", "off_st")],
        ),
        ([LIMIT], []),
        (
            [LIMIT | {"sites": {"ids": ["YARD-07"]}}],
            [("/rules/0/measure", "units_differ"), ("/shortage_measure", "shortage_measure")],
        ),
        ([LIMIT | {"sites": {"ids": ["YARD-07"]}, "items": {"ids": ["ROAD-25"]}}], []),
        (
            [LIMIT | {"sites": {"ids": ["YARD-07"]}, "items": {"ids": ["BRINE"]}}],
            [],
        ),
        ([LIMIT | {"sites": {"role": ["warehouse"]}, "flow": "sent", "per": "each"}], []),
        (
            [LIMIT | {"sites": {"role": ["warehouse"]}, "flow": "sent"}],
            [("/rules/0/per", "per_missing")],
        ),
        ([LIMIT | {"measure": "volume_m3"}], [("/rules/0/measure", "measure_unknown")]),
    ],
)
def test_rules_must_agree_with_the_network_and_each_other(
    rules: list[dict[str, Any]], faults: list[tuple[str, str]], tmp_path: Path
) -> None:
    """X passes brine alone; YARD-07 receives both items, and brine only from named origins."""
    entries = found(report_of(tmp_path, *rules))

    assert [place for place, _ in entries] == [place for place, _ in faults]
    for (_, code), (_, expected) in zip(entries, faults, strict=True):
        assert code.startswith(expected)


def test_what_a_closure_drops_is_doubted(tmp_path: Path) -> None:
    """A must-ship on a closed lane is dropped, and whoever wrote it is warned."""
    document = sound()
    document["lanes"][0]["must_ship"] = "5"
    closed = {"rule": "closure", "id": "c", "sites": {"ids": ["DEP-NORTH"]}}
    document["rules"] = [closed]

    caution = doubted(check(document, tmp_path / "all"))["must_ship_closed"]

    assert caution["examples"] == [{"pointer": "/lanes/0/must_ship", "value": "5"}]
    document["rules"] = [closed | {"items": {"ids": ["BRINE"]}}]
    assert "must_ship_closed" not in doubted(check(document, tmp_path / "other"))


@pytest.mark.parametrize(
    ("rule", "place", "value"),
    [
        ({"rule": "closure", "lanes": {"ids": ["L1", "L2"]}}, "/rules/0/lanes/ids", "L2"),
        ({"rule": "closure", "lanes": {"origin": ["YARD-07"]}}, "/rules/0/lanes/origin", "YARD-07"),
        ({"rule": "closure", "sites": {"tag": ["inland"]}}, "/rules/0/sites/tag", "inland"),
        (
            {"rule": "closure", "lanes": {"carrier": ["C-RAIL"], "origin": ["X"]}},
            "/rules/0/lanes",
            "r0",
        ),
        (
            {"rule": "closure", "lanes": {}, "items": {"ids": ["PEPPER"]}},
            "/rules/0/items/ids",
            "PEPPER",
        ),
    ],
)
def test_a_selector_that_picks_nothing_is_doubted(
    rule: dict[str, Any], place: str, value: str, tmp_path: Path
) -> None:
    """A slip in a rule would otherwise show only in the plan, if at all."""
    caution = doubted(report_of(tmp_path, rule))["selector_picks_nothing"]

    assert {"pointer": place, "value": value} in caution["examples"]


@pytest.mark.parametrize(
    ("period", "code"),
    [({"until": "2026-02-02"}, "rule_expired"), ({"from": "2026-02-04"}, "rule_not_begun")],
)
def test_a_rule_that_does_not_hold_is_listed(
    period: dict[str, str], code: str, tmp_path: Path
) -> None:
    """Expired rules are listed, not applied."""
    assert code in doubted(report_of(tmp_path, {"rule": "closure", "lanes": {}} | period))


@pytest.mark.parametrize("dated", [True, False])
def test_limits_that_items_share_are_refused_by_name_where_there_are_dates(
    dated: bool,  # noqa: FBT001 - drawn by name
    tmp_path: Path,
) -> None:
    """What is not built together is refused, not dropped: a lane's room on several days."""
    shared = {"rule": "shared_capacity", "lanes": {"ids": ["L1"]}, "maximum": "5"}
    periods = {"periods": ["2026-02-03", "2026-02-04"]} if dated else {}

    entries = found(report_of(tmp_path, shared, **periods))

    assert ("/rules/0", "not_yet") in entries if dated else not entries
