"""One run of the benchmarks: networks drawn, solved by everybody, compared, one after the other.

Every piece of work is done in a fresh child process, and R, OR-Tools' full solve, is measured
beside each of ours, so that a change of the machine's load meets both. That all costs are equal is
an error where it fails; no time is.
"""

import shutil
import subprocess
import sys
import time
from collections.abc import Callable
from dataclasses import asdict, dataclass, field
from pathlib import Path
from typing import Any

import orjson

from service.engine.process import child_environment
from tests.benchmarks.lemon import LEMON_PROBLEM, Lemon
from tests.benchmarks.programmes import Case

ROOT = Path(__file__).parents[2]
# Long enough for HiGHS on a million lanes of a busy machine.
CHILD_SECONDS_MAX = 420.0

R = "OR-Tools"
LEMON = "LEMON"
COLD, WARM = "Lanewright", "Lanewright, warm"

Record = dict[str, Any]


class MeasuringError(Exception):
    """A piece of work failed or took too long; the text says which and why."""


@dataclass(slots=True, kw_only=True)
class Campaign:
    """What has been measured so far, and what has not and why."""

    folder: Path
    lemon: Lemon
    ends_at: float
    say: Callable[[str], None]
    networks: list[Record] = field(default_factory=list)
    not_run: list[dict[str, str]] = field(default_factory=list)
    unequal: list[str] = field(default_factory=list)
    failed: list[str] = field(default_factory=list)

    @property
    def time_is_up(self) -> bool:
        """Return whether the run has to end."""
        return time.monotonic() > self.ends_at

    def leave_out(self, what: str, because: str) -> None:
        """Note that something is not measured; the report says so."""
        if {"what": what, "because": because} not in self.not_run:
            self.not_run.append({"what": what, "because": because})
            self.say(f"not run: {what}: {because}")

    def child(self, task: str, **request: object) -> Record:
        """Have a fresh child do a piece of work."""
        try:
            done = subprocess.run(
                [sys.executable, "-m", "tests.benchmarks.work"],
                input=orjson.dumps({"task": task, **request}),
                cwd=ROOT,
                env=child_environment(),
                capture_output=True,
                timeout=CHILD_SECONDS_MAX,
                check=False,
            )
        except subprocess.TimeoutExpired as error:
            raise MeasuringError(f"stopped after {CHILD_SECONDS_MAX:.0f} s") from error
        if done.returncode != 0:
            last = done.stderr.decode(errors="replace").strip()[-1500:]
            raise MeasuringError(f"ended with {done.returncode}: {last}")
        answer: Record = orjson.loads(done.stdout)
        return answer

    def attempt(self, what: str, work: Callable[[], None]) -> None:
        """Do a part of the run; where it fails, note it and go on with the next."""
        if self.time_is_up:
            self.leave_out(what, "the time of this run was up")
            return
        self.say(what)
        try:
            work()
        except (MeasuringError, RuntimeError, OSError, ValueError) as error:
            self.failed.append(f"{what}: {error}")
            self.say(f"failed: {what}: {error}")

    def dense(self, case: Case) -> None:
        """Measure one dense network, its pipeline, and the days after it."""
        today = self._new_folder()
        record = self._prepared(
            today, "prepare", recipe=asdict(case.recipe), change=None, forms=case.forms
        )
        record |= {"name": case.recipe.name, "kind": case.recipe.kind, "seed": case.recipe.seed}
        try:
            self._solvers(record, today, case)
            for form in case.forms:
                for _ in range(case.repetitions):
                    self._measured(record, f"pipeline, {form}", "pipeline", today, form=form)
            self.compare(record)
            for change in case.changes:
                self.attempt(
                    f"{case.recipe.name}, then {change}",
                    lambda change=change: self._next_day(case, change, today),  # type: ignore[misc] # bound now
                )
        finally:
            shutil.rmtree(today)

    def _next_day(self, case: Case, change: str, today: Path) -> None:
        """Measure the warm start: the network of a day later, from the plan of today."""
        folder = self._new_folder()
        record = self._prepared(
            folder, "prepare", recipe=asdict(case.recipe), change=change, forms=()
        )
        record |= {
            "name": f"{case.recipe.name}, then {change}",
            "kind": change,
            "seed": case.recipe.seed,
        }
        try:
            for number in range(case.repetitions):
                self._measured(record, R, "solve", folder, solver=R)
                if number == 0:
                    self._measured(record, COLD, "plan", folder, warm_from=None)
                self._measured(record, WARM, "plan", folder, warm_from=str(today))
            self.compare(record)
        finally:
            shutil.rmtree(folder)

    def netgen(self, name: str, repetitions: int) -> None:
        """Measure one published sparse network."""
        folder = self._new_folder()
        record = self._prepared(folder, "prepare_netgen", name=name)
        record |= {"name": f"NETGEN {name}", "kind": "NETGEN", "seed": None}
        try:
            case = Case(recipe=None, repetitions=repetitions, rivals=("networkx", "SciPy HiGHS"))  # type: ignore[arg-type] # read from a file
            self._solvers(record, folder, case)
            self.compare(record)
        finally:
            shutil.rmtree(folder)

    def _prepared(self, folder: Path, task: str, **request: object) -> Record:
        """Draw a network; return its empty record."""
        record = self.child(task, folder=str(folder), **request)
        record |= {"measured": {}, "objectives": {}, "plans": []}
        self.networks.append(record)
        return record

    def _solvers(self, record: Record, folder: Path, case: Case) -> None:
        """Solve by everybody; the others once, OR-Tools, LEMON and ours as often as it says."""
        for number in range(case.repetitions):
            self._measured(record, R, "solve", folder, solver=R)
            self._measured(record, COLD, "plan", folder, warm_from=None)
            if self.lemon.program is not None:
                self._by_lemon(record, folder)
            for rival in case.rivals if number == 0 else ():
                try:
                    self._measured(record, rival, "solve", folder, solver=rival)
                except MeasuringError as error:
                    self.leave_out(f"{rival} on {record['name']}", str(error))

    def _measured(
        self, record: Record, as_: str, task: str, folder: Path, **request: object
    ) -> None:
        """Have something measured, and keep it."""
        answer = self.child(task, folder=str(folder), **request)
        record["objectives"].setdefault(as_, []).append(answer.pop("objective"))
        digest = answer.pop("plan_digest", None)
        # The warnings of a plan tell where in the body they arose, and so differ by form.
        if digest is not None and task == "plan":
            record["plans"].append(digest)
        record["measured"].setdefault(as_, []).append(answer)

    def _by_lemon(self, record: Record, folder: Path) -> None:
        """Have LEMON solve the problem."""
        try:
            answer = self.lemon.solve(folder / LEMON_PROBLEM, seconds_max=CHILD_SECONDS_MAX)
        except subprocess.SubprocessError as error:
            raise MeasuringError(f"LEMON: {error}") from error
        record["objectives"].setdefault(LEMON, []).append(answer.pop("objective"))
        record["measured"].setdefault(LEMON, []).append(answer)

    def compare(self, record: Record) -> None:
        """Note where not everybody found the same cost, or not every route the same plan."""
        found = {name: sorted(set(values)) for name, values in record["objectives"].items()}
        if "published_optimum" in record:
            found["as published"] = [record["published_optimum"]]
        if len({value for values in found.values() for value in values}) != 1:
            self.unequal.append(f"{record['name']}: costs differ: {found}")
        if len(set(record["plans"])) > 1:
            self.unequal.append(f"{record['name']}: plans differ by route")

    def _new_folder(self) -> Path:
        """Return an empty folder of its own."""
        path = self.folder / f"network-{time.monotonic_ns()}"
        path.mkdir()
        return path
