"""What one measuring child does: a single piece of work in a fresh process.

Started as ``python -m tests.benchmarks.work`` with a request as JSON on standard input; answers
with one line of JSON. Everything is loaded, and tried on a tiny network, before the clock starts:
what is compared is work, not start-up.
"""

import sys
import tempfile
from collections.abc import Callable, Mapping
from hashlib import sha256
from pathlib import Path
from typing import Any, Final, cast

import orjson

from service.engine.child import collect_seldom
from service.network.intake import IntakeReport, Limits, intake
from service.network.options import Options
from service.planning.outcome import PLAN_FILE, WARM_START_FILE
from service.planning.task import plan
from tests.benchmarks.clock import PhaseClock
from tests.benchmarks.forms import FORMS
from tests.benchmarks.instances import Change, Dense, Recipe, dense, tomorrow
from tests.benchmarks.lemon import LEMON_PROBLEM, write_problem
from tests.benchmarks.problems import (
    PROBLEM,
    Problem,
    dense_problem,
    plan_objective,
    sparse_problem,
)
from tests.benchmarks.rivals import SOLVERS
from tests.benchmarks.stopwatch import Stopwatch

Request = Mapping[str, Any]
Answer = dict[str, Any]

RESULTS = "results"


def prepare(request: Request) -> Answer:
    """Draw a network into a folder: its problem, its bodies, and what its intake leaves."""
    folder = Path(request["folder"])
    recipe = Recipe(**request["recipe"])
    network = dense(recipe)
    if request["change"] is not None:
        network = tomorrow(network, cast("Change", request["change"]), seed=recipe.seed)
    bodies = {}
    for form in request["forms"]:
        make, _ = FORMS[form]
        body = make(network)
        (folder / form).write_bytes(body)
        bodies[form] = len(body)
    _keep(dense_problem(network), folder)
    _take_in(FORMS["cost table"][0](network), folder, FORMS["cost table"][1])
    return {"lanes": recipe.lanes, "bodies": bodies}


def prepare_netgen(request: Request) -> Answer:
    """Do the same with a published network of NETGEN."""
    from tests.published.test_netgen import (  # noqa: PLC0415 - it loads all of pytest
        INSTANCES,
        netgen_document,
        read_dimacs,
    )

    folder = Path(request["folder"])
    case = next(each for each in INSTANCES if each.name == request["name"])
    _keep(sparse_problem(*read_dimacs(case.name)), folder)
    _take_in(orjson.dumps(netgen_document(case)), folder, "application/json")
    return {"lanes": case.arcs, "bodies": {}, "published_optimum": case.optimum}


def _keep(problem: Problem, folder: Path) -> None:
    """Write the bare problem for every solver."""
    problem.write(folder / PROBLEM)
    write_problem(problem, folder / LEMON_PROBLEM)


def _take_in(body: bytes, folder: Path, media_type: str) -> IntakeReport:
    """Run the intake over ``body`` as its child does."""
    spool = folder / "spool"
    spool.write_bytes(body)
    report = intake(
        spool,
        folder,
        options=Options(),
        media_type=media_type,
        content_encoding=None,
        limits=Limits(unpacked_bytes_max=4 * 2**30),
    )
    spool.unlink()
    if report.status != "accepted":
        raise RuntimeError(f"the intake refused the network: {report.faults[:3]}")
    return report


def solve(request: Request) -> Answer:
    """Solve the bare problem with another solver."""
    solver = SOLVERS[request["solver"]]
    solver(_tiny_problem())
    problem = Problem.read(Path(request["folder"]) / PROBLEM)
    with Stopwatch() as watch:
        objective = solver(problem)
    return {**watch.to_document(), "objective": objective}


def plan_it(request: Request) -> Answer:
    """Plan the network of a folder as the planning child does; ``warm_from`` is a former run."""
    _warm_up("cost table")
    folder = Path(request["folder"])
    (folder / WARM_START_FILE).unlink(missing_ok=True)
    if request["warm_from"] is not None:
        former = Path(request["warm_from"]) / RESULTS / WARM_START_FILE
        (folder / WARM_START_FILE).write_bytes(former.read_bytes())
    results = folder / RESULTS
    results.mkdir(exist_ok=True)
    with Stopwatch() as watch:
        phases = _planned(folder, results)
    return {**watch.to_document(), "phases": phases, **_outcome(folder, results)}


def pipeline(request: Request) -> Answer:
    """Take a body in and plan it, bytes to proved plan, in one process."""
    _warm_up(request["form"])
    source = Path(request["folder"])
    body = source / request["form"]
    with tempfile.TemporaryDirectory(dir=source) as name:
        folder = Path(name)
        clock = PhaseClock()
        with Stopwatch() as watch:
            clock.start()
            report = intake(
                body,
                folder,
                options=Options(),
                media_type=FORMS[request["form"]][1],
                content_encoding=None,
                limits=Limits(unpacked_bytes_max=4 * 2**30),
            )
            clock.seen("taken in", {})
            if report.status != "accepted":
                raise RuntimeError(f"the intake refused the network: {report.faults[:3]}")
            phases = _planned(folder, folder)
        answer = _outcome(source, folder)
    return {**watch.to_document(), "phases": {**clock.phases, **phases}, **answer}


def _planned(folder: Path, results: Path) -> dict[str, dict[str, float]]:
    """Plan; return how long each phase took."""
    clock = PhaseClock()
    clock.start()
    outcome = plan(folder, Options(), results, progress=clock.seen)
    if outcome.state != "planned":
        raise RuntimeError(f"not planned: {outcome}")
    return clock.phases


def _outcome(problem_folder: Path, results: Path) -> Answer:
    """Return the plan's objective on the scale of the bare problem, and the plan's digest."""
    written = (results / PLAN_FILE).read_bytes()
    objective = plan_objective(orjson.loads(written), problem_folder / PROBLEM)
    return {"objective": objective, "plan_digest": sha256(written).hexdigest()}


def _tiny() -> Dense:
    """Return a network on which everything is loaded that is loaded late."""
    return dense(Recipe(warehouses=3, ship_tos=50, seed=999))


def _tiny_problem() -> Problem:
    """Return it as a bare problem."""
    return dense_problem(_tiny())


def _warm_up(form: str) -> None:
    """Take the tiny network in and plan it once; then collect garbage as a child does."""
    make, media_type = FORMS[form]
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        _take_in(make(_tiny()), folder, media_type)
        _planned(folder, folder)
    collect_seldom()


TASKS: Final[Mapping[str, Callable[[Request], Answer]]] = {
    "prepare": prepare,
    "prepare_netgen": prepare_netgen,
    "solve": solve,
    "plan": plan_it,
    "pipeline": pipeline,
}


def main() -> None:
    """Do what the request says."""
    request = orjson.loads(sys.stdin.buffer.read())
    answer = TASKS[request["task"]](request)
    sys.stdout.buffer.write(orjson.dumps(answer) + b"\n")


if __name__ == "__main__":
    main()
