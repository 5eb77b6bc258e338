"""Every solver finds the same cost, and every form and route the same plan: small, and no time."""

import shutil
from dataclasses import asdict, replace
from fractions import Fraction
from pathlib import Path
from typing import Any

import pytest

from service.planning.outcome import WARM_START_FILE
from tests.benchmarks import sharing, work
from tests.benchmarks.forms import FORMS
from tests.benchmarks.instances import CENTS, Change, Recipe, dense
from tests.benchmarks.lemon import LEMON_PROBLEM, find_lemon
from tests.benchmarks.problems import PROBLEM, Problem, dense_problem
from tests.benchmarks.programmes import CHANGES
from tests.benchmarks.rivals import SOLVERS, ortools_full

RECIPES = [
    Recipe(warehouses=8, ship_tos=60, seed=201),
    Recipe(warehouses=8, ship_tos=60, seed=202, capped=30),
    Recipe(warehouses=8, ship_tos=60, seed=203, supply_ratio=100),
    Recipe(warehouses=8, ship_tos=60, seed=204, supply_ratio=84),
    Recipe(warehouses=8, ship_tos=60, seed=205, costs="ties"),
]
# Enough lanes for a shortlist, few enough order lines for a quick test.
SIFTED = Recipe(warehouses=100, ship_tos=320, seed=206)


def prepared(folder: Path, recipe: Recipe, change: Change | None = None) -> Path:
    """Draw a network into a new folder, in all forms."""
    folder.mkdir()
    work.prepare(
        {
            "folder": str(folder),
            "recipe": asdict(recipe),
            "change": change,
            "forms": tuple(FORMS) if change is None else (),
        }
    )
    return folder


def planned(folder: Path, warm_from: Path | None = None) -> work.Answer:
    """Plan what is in a folder."""
    return work.plan_it({"folder": str(folder), "warm_from": warm_from and str(warm_from)})


@pytest.mark.parametrize("recipe", RECIPES, ids=lambda recipe: recipe.kind)
def test_every_solver_finds_the_same_cost(recipe: Recipe, tmp_path: Path) -> None:
    """A ratio to a solver that solves another problem would say nothing."""
    folder = prepared(tmp_path / "network", recipe)

    found = {
        name: work.solve({"folder": str(folder), "solver": name})["objective"] for name in SOLVERS
    }
    found["ours"] = planned(folder)["objective"]

    assert len(set(found.values())) == 1, found


@pytest.mark.parametrize("recipe", RECIPES[:2], ids=lambda recipe: recipe.kind)
def test_every_form_gives_the_same_plan(recipe: Recipe, tmp_path: Path) -> None:
    """To the last byte: a form that means something else would be measured for nothing."""
    folder = prepared(tmp_path / "network", recipe)

    found = {
        form: work.pipeline({"folder": str(folder), "form": form})["plan_digest"] for form in FORMS
    }

    assert set(found.values()) == {planned(folder)["plan_digest"]}, found


@pytest.mark.parametrize("capped", [0, 30])
def test_a_shortlist_finds_the_cost_of_all_lanes(capped: int, tmp_path: Path) -> None:
    """32,000 lanes are enough for the sifted route; the full solve sees them all."""
    recipe = replace(SIFTED, capped=capped)
    folder = prepared(tmp_path / "network", recipe)

    answer = planned(folder)

    assert answer["objective"] == ortools_full(Problem.read(folder / PROBLEM))


def test_a_warm_start_changes_no_plan(tmp_path: Path) -> None:
    """Whatever has changed overnight: the plan is that of a cold start."""
    today = prepared(tmp_path / "today", SIFTED)
    planned(today)
    assert (today / work.RESULTS / WARM_START_FILE).exists()

    for change in CHANGES:
        later = prepared(tmp_path / change, SIFTED, change)
        cold, warm = planned(later), planned(later, warm_from=today)
        assert warm["plan_digest"] == cold["plan_digest"], change
        assert cold["objective"] == ortools_full(Problem.read(later / PROBLEM)), change
        shutil.rmtree(later)


def test_a_published_network_has_its_published_cost(tmp_path: Path) -> None:
    """The bare problem and our plan are both that of the file."""
    answer = work.prepare_netgen({"folder": str(tmp_path), "name": "klingman74-24-c100"})

    assert ortools_full(Problem.read(tmp_path / PROBLEM)) == answer["published_optimum"]
    assert planned(tmp_path)["objective"] == answer["published_optimum"]


def test_lemon_agrees_or_says_what_is_missing(tmp_path: Path) -> None:
    """Where compiler and headers are, it finds the same cost; where not, the report can say why."""
    lemon = find_lemon(tmp_path)
    folder = prepared(tmp_path / "network", RECIPES[1])

    assert (lemon.program is None) == bool(lemon.absent)
    if lemon.program is not None:
        answer = lemon.solve(folder / LEMON_PROBLEM, seconds_max=60)
        assert answer["objective"] == ortools_full(Problem.read(folder / PROBLEM))


def test_what_is_short_has_its_weight() -> None:
    """16 % of the goods are missing, however cheap it would be to serve somebody else twice."""
    network = dense(RECIPES[3])
    wanted, there = int(network.demand.sum()), int(network.supply.sum())
    assert there == wanted * 84 // 100

    problem = dense_problem(network)
    money = ortools_full(problem) - problem.weight * (wanted - there)

    # Each of the units that are there is worth what a lane costs: 20 to 2,000.
    assert 20 * CENTS * there < money < 2000 * CENTS * there


def test_what_is_no_flow_has_no_cost() -> None:
    """A rival whose rounded answer breaks a balance or a capacity must not look cheap."""
    problem = dense_problem(dense(RECIPES[0]))

    with pytest.raises(ValueError, match="not a flow"):
        problem.objective(problem.cost * 0)


def test_seeds_that_were_tuned_on_measure_nothing() -> None:
    """Else the benchmark would show how well we remember."""
    with pytest.raises(ValueError, match="tuned"):
        dense(Recipe(warehouses=2, ship_tos=2, seed=14))


@pytest.mark.parametrize("recipe", RECIPES, ids=lambda recipe: recipe.kind)
def test_a_seed_draws_one_network(recipe: Recipe) -> None:
    """Everybody measures the same; another seed is another network."""
    first, again = dense(recipe), dense(recipe)
    other = dense(Recipe(**{**asdict(recipe), "seed": recipe.seed + 50}))

    def columns(network: Any) -> list[bytes]:  # noqa: ANN401 - any instance
        parts = (network.cost, network.capacity, network.supply, network.demand)
        return [part.tobytes() for part in parts]

    assert columns(first) == columns(again)
    assert columns(first) != columns(other)


@pytest.mark.parametrize("seed", [301, 302, 303])
def test_bound_and_plan_of_shared_limits_enclose_what_highs_finds(seed: int) -> None:
    """Limits are rounded to what whole bags weigh, so that ours is no looser; the plan is near."""
    one = sharing.drawn(seed, origins=5, ends=40, items=3)

    _, relaxed = sharing.by_highs(one)
    _, cost, bound = sharing.by_us(one)

    assert relaxed - 0.01 <= bound <= cost
    assert cost <= bound * Fraction("1.02")
