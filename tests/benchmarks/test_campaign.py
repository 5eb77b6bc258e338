"""One run of the benchmarks: it ends by itself, and nothing that went wrong in it is silent."""

import time
from pathlib import Path

import pytest

from tests.benchmarks.__main__ import main, measure
from tests.benchmarks.campaign import Campaign, MeasuringError
from tests.benchmarks.instances import Recipe
from tests.benchmarks.lemon import Lemon
from tests.benchmarks.programmes import ALL_FORMS, LONG, QUICK, STANDARD, Case, Programme, Serving

SMALL = Recipe(warehouses=5, ship_tos=40, seed=301)
TINY = Programme(
    name="tiny",
    minutes=10,
    cases=(
        Case(recipe=SMALL, repetitions=1, rivals=("networkx", "SciPy HiGHS"), forms=ALL_FORMS),
        # Enough lanes for a shortlist, which is what a later run can start from.
        Case(
            recipe=Recipe(warehouses=100, ship_tos=320, seed=302),
            repetitions=1,
            changes=("demand 10 %", "outage"),
        ),
    ),
    netgen=("klingman74-24-c100",),
    serving=Serving(
        recipe=SMALL, small=SMALL, repetitions=1, small_repetitions=2, watched_repetitions=1
    ),
)


@pytest.fixture
def campaign(tmp_path: Path) -> Campaign:
    """Return a run that has a minute left and no LEMON."""
    lemon = Lemon(program=None, version=None, absent="no g++")
    return Campaign(folder=tmp_path, lemon=lemon, ends_at=time.monotonic() + 60, say=lambda _: None)


def test_a_part_that_fails_is_named_and_the_next_one_runs(campaign: Campaign) -> None:
    """An hour of measurements is not lost with one of them."""
    done = []

    def fail() -> None:
        raise MeasuringError("stopped after 420 s")

    campaign.attempt("first", fail)
    campaign.attempt("second", lambda: done.append(2))

    assert campaign.failed == ["first: stopped after 420 s"]
    assert done == [2]


def test_what_no_time_is_left_for_is_named(campaign: Campaign) -> None:
    """The run ends by itself, and the report shows where."""
    done: list[int] = []
    campaign.ends_at = time.monotonic() - 1

    campaign.attempt("second", lambda: done.append(2))

    assert done == []
    assert campaign.not_run == [{"what": "second", "because": "the time of this run was up"}]


def test_a_child_that_dies_says_why(campaign: Campaign) -> None:
    """Its last words are in the report."""
    with pytest.raises(MeasuringError, match="KeyError"):
        campaign.child("a task that there is not")


def test_a_network_measured_by_children_is_compared(campaign: Campaign) -> None:
    """Solved by others and by us, each in a process of its own: the costs agree."""
    campaign.dense(Case(recipe=SMALL, repetitions=1, rivals=("networkx",)))

    (record,) = campaign.networks
    assert set(record["measured"]) == {"OR-Tools", "Lanewright", "networkx"}
    assert len({value for values in record["objectives"].values() for value in values}) == 1
    assert campaign.unequal == []
    assert all(each["seconds"] > 0 for (each,) in record["measured"].values())
    assert list(campaign.folder.iterdir()) == []


def test_a_cost_or_a_plan_that_differs_is_named(campaign: Campaign) -> None:
    """Nothing about time makes a run fail, and this does."""
    fine = {"name": "fine", "objectives": {"a": [7, 7], "b": [7]}, "plans": ["x", "x"]}
    dear = {"name": "dear", "objectives": {"a": [7, 7], "b": [8]}, "plans": []}
    other = {"name": "other", "objectives": {"a": [7]}, "plans": ["x", "y"]}
    printed = {"name": "print", "objectives": {"a": [7]}, "plans": [], "published_optimum": 6}

    for record in (fine, dear, other, printed):
        campaign.compare(record)

    assert [text.partition(":")[0] for text in campaign.unequal] == ["dear", "other", "print"]


@pytest.mark.parametrize("programme", [QUICK, STANDARD, LONG], ids=lambda each: each.name)
def test_a_programme_draws_no_network_twice(programme: Programme) -> None:
    """Two seeds that are one would look like agreement."""
    recipes = [case.recipe for case in programme.cases]

    assert len(set(recipes)) == len(recipes)
    assert programme.minutes > 0


@pytest.mark.long
def test_a_whole_run_measures_everything_and_agrees() -> None:
    """With children, LEMON where it is, and a real service."""
    document = measure(TINY, minutes=TINY.minutes)

    assert document["unequal"] == document["failed"] == []
    assert {str(each["what"]) for each in document["not_run"]} <= {"LEMON's network simplex"}  # type: ignore[attr-defined] # a list of objects
    assert len(document["served"]) == 2 + len(ALL_FORMS)  # type: ignore[arg-type] # likewise


def test_a_run_without_time_says_that_nothing_ran(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """And its document can be reported again later."""
    path = tmp_path / "figures.json"

    assert main(["--quick", "--minutes", "0", "--json", str(path)]) == 0
    first = capsys.readouterr().err
    assert main(["--from", str(path)]) == 0
    again = capsys.readouterr().err

    assert "Not run: NETGEN klingman74-05-c100: the time of this run was up." in again
    assert again.strip() in first
