"""Figures, goals and the report, from documents made by hand."""

from typing import Any

import pytest

from tests.benchmarks.figures import exponent, growth, ratio, solve_and_proof
from tests.benchmarks.goals import Line, goal_lines
from tests.benchmarks.report import BEGIN, END, markdown, with_block
from tests.benchmarks.watching import nearest_rank


def took(*seconds: float) -> list[dict[str, Any]]:
    """Return measurements of whole solves; the processor worked half of the time."""
    return [{"seconds": s, "cpu_seconds": s / 2, "added_bytes": 1_000_000 * s} for s in seconds]


def planned(solved: float, proved: float) -> dict[str, Any]:
    """Return a measurement of planning with 1 second of other phases."""
    phases = {"read": 0.5, "compiled": 0.5, "solved": solved, "proved": proved}
    return {
        "seconds": sum(phases.values()),
        "cpu_seconds": sum(phases.values()),
        "added_bytes": 5_000_000,
        "phases": {name: {"seconds": s, "cpu_seconds": s} for name, s in phases.items()},
    }


def network(lanes: int, full: float, ours: list[dict[str, Any]]) -> dict[str, Any]:
    """Return the record of a dense network."""
    return {
        "name": f"{lanes} lanes",
        "kind": "dense",
        "seed": 101,
        "lanes": lanes,
        "measured": {"OR-Tools": took(full), "Lanewright": ours},
    }


def document(networks: list[dict[str, Any]]) -> dict[str, Any]:
    """Return a whole document of a run."""
    return {
        "programme": "by hand",
        "began": "2026-12-01T16:00:00Z",
        "machine": {"processor": "abacus", "cores": 2, "memory_gib": 4.0},
        "load": {"began": 0.1, "ended": 0.9},
        "versions": {"python": "3.11", "lemon": None},
        "goals": [line.to_document() for line in goal_lines(networks, [])],
        "growth": growth(networks),
        "networks": networks,
        "served": [],
        "unequal": [],
        "failed": [],
        "not_run": [{"what": "LEMON's network simplex", "because": "no g++"}],
    }


def test_a_ratio_is_that_of_medians_and_the_worst_network() -> None:
    """R 2 s and 4 s; ours 1 s (the middle of three) and 3 s: 0.5 and 0.75."""
    records = [
        {"measured": {"OR-Tools": took(2, 2, 9), "ours": took(0.1, 1, 5)}},
        {"measured": {"OR-Tools": took(4), "ours": took(3)}},
        {"measured": {"OR-Tools": took(4)}},
    ]

    found = ratio(records, "ours")

    assert found is not None
    assert (found.median, found.worst, found.networks) == (0.625, 0.75, 2)
    assert found.cpu_median == 0.625
    assert ratio(records, "nobody") is None


def test_solve_and_proof_leaves_reading_and_writing_out() -> None:
    """Rounds that are told as phases of their own belong to the solve."""
    answer = planned(solved=2, proved=3)
    answer["phases"]["round"] = {"seconds": 0.25, "cpu_seconds": 0.25}
    answer["phases"]["written"] = {"seconds": 9, "cpu_seconds": 9}

    assert solve_and_proof(answer) == 5.25


@pytest.mark.parametrize("power", [0.5, 1.0, 2.0])
def test_the_exponent_of_a_power_is_found(power: float) -> None:
    """On the points of y = 3 x^b it is b."""
    points = [(x, 3 * x**power) for x in (10.0, 100.0, 10_000.0)]

    assert exponent(points) == pytest.approx(power)
    assert exponent(points[:1]) is None


def test_the_percentile_is_one_of_the_values() -> None:
    """Of 200 answers two may be slower than the 99th percentile."""
    values = [float(value) for value in range(200, 0, -1)]

    assert nearest_rank(values, 99) == 198
    assert nearest_rank(values, 50) == 100
    assert nearest_rank([7.0], 99) == 7


@pytest.mark.parametrize(
    ("figure", "verdict"),
    [(None, "not run"), (0.1, "stretch"), (0.2, "met"), (0.25, "met"), (0.2501, "missed")],
)
def test_a_goal_is_met_or_missed_without_rounding(figure: float | None, verdict: str) -> None:
    """A figure just above its goal has missed it, and one that is missing has not met it."""
    line = Line(what="x", unit="R", figure=figure, goal=0.25, stretch=0.15, detail="")

    assert line.verdict == verdict


def test_the_report_says_what_was_measured_and_what_was_not() -> None:
    """10 s against R of 20 s are half of R: missed; and LEMON was not there."""
    networks = [
        network(1_000_000, 20.0, [planned(solved=4, proved=6)]),
        network(100_000, 2.0, [planned(solved=0.4, proved=0.6)]),
    ]

    text = markdown(document(networks))

    assert "| solve + proof, cold, 1M lanes, worst | 0.5 R | 0.25 R | 0.15 R | missed |" in text
    assert "| 1,000,000 | dense | 1 | 20 |  | 10 (0.50 R) |" in text
    assert "| Lanewright | 1 | 0 |" in text
    assert "Not run: LEMON's network simplex: no g++." in text
    assert "All costs equal on 2 networks." in text


def test_costs_that_differ_lead_the_last_list() -> None:
    """Nobody may read past them."""
    made = document([]) | {"unequal": ["n: costs differ: 1, 2"], "failed": ["HTTP: broke"]}

    text = markdown(made)

    assert "WRONG: n: costs differ" in text
    assert "Failed: HTTP: broke." in text
    assert "All costs equal" not in text


def test_only_what_is_between_the_marks_is_replaced() -> None:
    """The rest of the README is written by people."""
    text = f"before\n{BEGIN}\n\nold\n\n{END}\nafter\n"

    once = with_block(text, "new")

    assert once == f"before\n{BEGIN}\n\nnew\n\n{END}\nafter\n"
    assert with_block(once, "new") == once


@pytest.mark.parametrize("text", ["", BEGIN, f"{END} {BEGIN}", f"{BEGIN}{END}{BEGIN}{END}"])
def test_a_file_without_the_marks_is_left_alone(text: str) -> None:
    """A guess where the tables might go could delete what somebody wrote."""
    with pytest.raises(ValueError, match="once each"):
        with_block(text, "new")
