"""Options: every one is read, refused by name, or unknown; none is ignored."""

from datetime import date
from fractions import Fraction

import pytest

from service.network.options import Options, read_options

ALL_TEXTS = {
    "shortages": "forbid",
    "worth_at_most": "12.50",
    "demand_rounding": "up",
    "bad_rows": "set_aside",
    "label": "evening",
    "plan_for": "2026-02-03",
    "deadline_seconds": "900",
    "maximum_age_minutes": "0",
}


def test_no_options_means_the_defaults_of_the_interface() -> None:
    """As the README promises: shortages allowed, rounding and bad rows refused, 60 seconds."""
    options, faults = read_options({})

    assert faults == ()
    assert options == Options(
        shortages="allow",
        worth_at_most=None,
        demand_rounding="refuse",
        bad_rows="refuse",
        label=None,
        plan_for=None,
        deadline_seconds=60,
        maximum_age_minutes=None,
    )


def test_every_option_is_read_and_written_back() -> None:
    """What is digested and stored is every effective value, decimals as text."""
    options, faults = read_options(ALL_TEXTS)

    assert faults == ()
    assert options is not None
    assert options.worth_at_most == Fraction("12.5")
    assert options.plan_for == date(2026, 2, 3)
    document = options.to_document()
    assert document == ALL_TEXTS | {
        "worth_at_most": "12.5",
        "deadline_seconds": 900,
        "maximum_age_minutes": 0,
    }
    assert Options.from_document(document) == options


@pytest.mark.parametrize(
    ("name", "text", "code"),
    [
        ("shortages", "Allow", "bad_option"),
        ("worth_at_most", "1e3", "not_a_number"),
        ("worth_at_most", "0.1234567", "too_many_decimals"),
        ("worth_at_most", "-1", "bad_option"),
        ("worth_at_most", "4611686018427387904", "number_too_large"),
        ("deadline_seconds", "0", "bad_option"),
        ("deadline_seconds", "901", "bad_option"),
        ("deadline_seconds", "60.0", "bad_option"),
        ("deadline_seconds", "9" * 5000, "bad_option"),
        ("maximum_age_minutes", "-1", "bad_option"),
        ("plan_for", "2026-02-30", "bad_option"),
        ("label", "", "bad_option"),
        ("label", "a\x00b", "bad_option"),
        ("label", "\ud800", "bad_option"),
        ("Label", "x", "unknown_option"),
        ("fair_shares", "true", "not_yet"),
        ("former_run", "run_1", "not_yet"),
        ("allowance", "1", "not_yet"),
        ("gap", "0.01", "not_yet"),
    ],
)
def test_a_bad_option_is_a_fault_at_its_name(name: str, text: str, code: str) -> None:
    """An option that is dropped in silence is a plan that was not asked for."""
    options, faults = read_options({"label": "ok"} | {name: text})

    assert options is None
    assert [(fault.pointer, fault.code) for fault in faults] == [(f"?{name}", code)]


def test_all_bad_options_are_reported_at_once() -> None:
    """A client mends them in one go."""
    _, faults = read_options({"shortages": "no", "what": "1", "gap": "1"})

    assert [fault.code for fault in faults] == ["bad_option", "unknown_option", "not_yet"]


@pytest.mark.parametrize(
    "change", [{"deadline_seconds": "60"}, {"shortages": True}, {"other": 1}, {"label": ""}]
)
def test_a_document_that_is_none_of_ours_is_refused(change: dict[str, object]) -> None:
    """Stored options are read again only if they are exactly what was written."""
    with pytest.raises(ValueError, match="not a document of options"):
        Options.from_document(Options().to_document() | change)
