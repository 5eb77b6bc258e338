"""The summary for a person, on plans made by hand."""

from typing import Any

import pytest

from service.doors.command_line.summary import summary_lines

DIGEST = "sha-256:" + "5a" * 32


def a_plan(**changes: Any) -> dict[str, Any]:  # noqa: ANN401 - a JSON document
    """Return a small plan in which everything goes: 880 bags from one depot for 224.40 EUR."""
    plan: dict[str, Any] = {
        "format": 1,
        "status": "planned",
        "name": "Evening cut-off",
        "currency": "EUR",
        "cut_off": "2026-02-03T16:00:00+01:00",
        "network_digest": DIGEST,
        "total_cost": "224.4",
        "total_cost_rounded": "224.40",
        "cost_parts": {
            "supply": "0",
            "handling": "35.2",
            "transport": "189.2",
            "charges": "0",
            "shortage": "0",
            "lateness": "0",
        },
        "totals": {
            "lines_complete": 1,
            "lines_in_part": 0,
            "lines_none": 0,
            "set_aside": 0,
            "quantities": [
                {"item": "A", "unit": "bag", "wanted": "880", "served": "880", "short": "0"}
            ],
        },
        "plan_lines": [],
        "order_lines": [
            {"reference": "SO-1", "site": "Y", "item": "A", "quantity": "880", "priority": 2}
        ],
        "consignments": [consignment("NORTH", pallets="22", weight_kg="22176", cost="189.2")],
        "shortages": [],
        "rules_in_force": [],
        "set_aside": [],
        "warnings": [],
        "certificate": {"lexicographic": "proved", "gap": "0", "lower_bound": "224.4"},
    }
    return plan | changes


def consignment(origin: str, **values: str) -> dict[str, str]:
    """Return what leaves ``origin`` on one lane."""
    return {"origin": origin} | values


def shortage(reference: str | None, quantity: str, **values: Any) -> dict[str, Any]:  # noqa: ANN401 - JSON
    """Return one shortage of item A at yard Y."""
    row = {"reference": reference, "site": "Y", "item": "A", "priority": 4, "reason": "no_stock"}
    return row | {"quantity": quantity} | values


def a_short_plan(*shortages: dict[str, Any]) -> dict[str, Any]:
    """Return a plan with the given shortages and an order line of 1000 bags for each."""
    totals = {
        "lines_complete": 297,
        "lines_in_part": 9,
        "lines_none": 6,
        "set_aside": 0,
        "quantities": [
            {"item": "A", "unit": "bag", "wanted": "61480", "served": "58900", "short": "2580"},
            {"item": "B", "unit": "tonne", "wanted": "12", "served": "12", "short": "0"},
        ],
    }
    orders = [
        {"reference": row["reference"], "quantity": "1000", "priority": row["priority"]}
        for row in shortages
    ]
    urgent = {"reference": "SO-1", "quantity": "5", "priority": 1}
    return a_plan(totals=totals, shortages=list(shortages), order_lines=[*orders, urgent])


def test_a_plan_without_a_shortage_says_so_in_one_sentence() -> None:
    """On a good evening nobody should have to read a table."""
    lines = summary_lines(a_plan(), run_number="2026-02-03/1")

    assert lines == [
        "Evening cut-off · cut-off Tue 3 Feb 2026 16:00 +01:00 · run 2026-02-03/1",
        "",
        "1 order line. Every line goes complete.",
        "It costs 224.40 EUR: handling 35.20, transport 189.20.",
        "Proved: no plan serves the same for less money.",
        "",
        "WHAT LEAVES",
        "  from   consignments  pallets  tonnes  transport EUR",
        "  NORTH             1     22.0    22.2         189.20",
        "",
        f"EVIDENCE   network {DIGEST}",
    ]


def test_shortages_come_by_priority_then_by_size() -> None:
    """The person at the telephone begins at the top."""
    plan = a_short_plan(
        shortage("SO-20", "640"),
        shortage("SO-30", "10", priority=2),
        shortage("SO-10", "1000", reason="no_lane"),
    )

    text = summary_lines(plan)

    start = text.index("WHO TO CALL   3 shortages; priority 1 is complete")
    assert [" ".join(line.split()) for line in text[start + 1 : start + 5]] == [
        "short of item ship-to order line pr because",
        "10 1 000 A Y SO-30 2 not enough stock",
        "1 000 1 000 A Y SO-10 4 no lane leads there",
        "640 1 000 A Y SO-20 4 not enough stock",
    ]


def test_sentences_lead_with_what_goes_and_what_does_not() -> None:
    """61 480 wanted, 58 900 served: 95.8 % by hand (58 900 / 61 480 = 0.9580)."""
    lines = summary_lines(a_short_plan(shortage("SO-20", "2580")))

    assert lines[2] == "312 order lines: 297 go complete, 9 in part, 6 not at all."
    assert lines[3] == "Served: A 58 900 of 61 480 bag (95.8 %); 1 other item in full."
    assert lines[5].startswith("Proved: no plan is short of less, priority by priority")


def test_who_was_served_instead_is_named() -> None:
    """A customer who asks why deserves more than a code."""
    by = {"reference": "SO-7", "quantity": "900", "priority": 1, "lines": 3}
    lines = summary_lines(a_short_plan(shortage("SO-20", "5", reason="outranked", outranked_by=by)))

    assert any(line.endswith("outranked by 3 lines, most by SO-7, pr 1") for line in lines)


def test_stock_that_could_not_be_kept_has_no_order_line() -> None:
    """Safety stock that is missing is a shortage, too, but nobody is to be called for it."""
    lines = summary_lines(a_short_plan(shortage(None, "5", kept=True)))

    assert any("stock to keep" in line for line in lines)


def test_a_plan_that_is_not_proved_does_not_say_so() -> None:
    """The word *proved* is worth something only if it can be missing."""
    certificate = {"lexicographic": "best_found", "gap": "4.4", "lower_bound": "220"}
    lines = summary_lines(a_plan(certificate=certificate))

    assert not any("Proved" in line for line in lines)
    assert "Not proved to be the best: no plan costs less than 220.00 EUR." in lines


def test_an_unknown_weight_is_not_nothing() -> None:
    """A total over items without a weight is unknown, never zero."""
    rows = [
        consignment("NORTH", pallets="22", weight_kg="unknown", cost="5"),
        consignment("NORTH", pallets="unknown", weight_kg="7", cost="5"),
        consignment("SOUTH", pallets="1", weight_kg="1", cost="5"),
    ]
    lines = summary_lines(a_plan(consignments=rows))

    assert "  NORTH             2  unknown  unknown          10.00" in lines


def test_a_total_that_nobody_knows_has_no_column() -> None:
    """Items without weights are common; a column of one word is noise."""
    rows = [consignment("NORTH", pallets="unknown", weight_kg="unknown", cost="5")]

    lines = summary_lines(a_plan(consignments=rows))

    assert "  from   consignments  transport EUR" in lines


def test_rules_doubts_and_lines_set_aside_are_told() -> None:
    """What a person did by hand, or should not trust, belongs beside the result."""
    rule = {"rule": "closure", "id": "R1", "note": "Snow", "owner": "roads", "applied": True}
    warning = {
        "code": "no_lane",
        "count": 2,
        "detail": "No lane reaches this demand",
        "examples": [],
    }
    lines = summary_lines(
        a_plan(
            rules_in_force=[rule | {"binding": True}, rule | {"id": "R0", "binding": False}],
            warnings=[warning],
            set_aside=[{"pointer": "/demand/4"}],
        )
    )

    start = lines.index("RULES   2 rules")
    assert lines[start + 1] == "  R1 (closure) binds: Snow (roads)"
    assert lines[start + 2] == "  R0 (closure) does not bind: Snow (roads)"
    start = lines.index("DOUBTS")
    assert lines[start + 1] == "  1 order line could not be read and went aside"
    assert lines[start + 2] == "  No lane reaches this demand (2 cases)"


def test_a_network_without_a_plan_says_why() -> None:
    """No plan is an answer; it must be one that somebody can act on."""
    reason = {
        "detail": "More is forced than can come in.",
        "items": [{"item": "A", "detail": "These lanes must take 500 out of X, 320 can come in."}],
    }
    plan = a_plan(status="no_plan", reason=reason, total_cost=None, total_cost_rounded=None)

    lines = summary_lines(plan)

    assert lines[2] == "There is no plan. More is forced than can come in."
    assert lines[3] == "  A: These lanes must take 500 out of X, 320 can come in."
    assert not any("WHAT LEAVES" in line for line in lines)


@pytest.mark.parametrize("width", [1, 64])
def test_a_large_plan_stays_near_thirty_lines_of_a_hundred_columns(width: int) -> None:
    """A summary that must be scrolled is none, however long the ids are."""
    shortages = [shortage(f"{number:0{width}}", "1", item="I" * width) for number in range(900)]
    plan = a_short_plan(*shortages)
    plan["consignments"] = [
        consignment(f"{number:0{width}}", pallets="1", weight_kg="1", cost="1")
        for number in range(50)
    ]
    rule = {"rule": "closure", "id": "R" * width, "note": "n" * 500, "applied": True}
    plan["rules_in_force"] = [rule | {"binding": True}] * 20
    plan["warnings"] = [{"code": "c", "count": 1, "detail": "d" * 500, "examples": []}] * 20

    lines = summary_lines(plan, run_number="2026-02-03/1")

    assert len(lines) <= 42
    assert max(len(line) for line in lines) <= 100
    assert "  and 893 more: --csv shortages lists all" in lines
    assert "  and 43 more sites: --csv consignments lists all" in lines
