"""The service measured from outside: networks sent, plans fetched, memory and liveness watched."""

import shutil
from dataclasses import asdict
from hashlib import sha256
from pathlib import Path
from typing import Any

import orjson

from tests.benchmarks.campaign import Campaign, R, Record
from tests.benchmarks.forms import FORMS
from tests.benchmarks.instances import Change, Recipe
from tests.benchmarks.problems import PROBLEM, plan_objective
from tests.benchmarks.programmes import Serving
from tests.benchmarks.served import Served, Service, serving, watching

NEXT_DAY: Change = "demand 10 %"
# A network of another size, so that nothing is left of it that a later one could start from.
_FIRST = Recipe(warehouses=3, ship_tos=50, seed=998)


class HttpCampaign:
    """All measurements of a real service; ``records`` hold them, one for each network."""

    def __init__(self, campaign: Campaign, programme: Serving) -> None:
        """Measure nothing yet."""
        self._campaign, self._programme = campaign, programme
        self.records: list[Record] = []
        self._expected: dict[Path, int] = {}

    def run(self) -> None:
        """Measure everything of the programme."""
        programme, attempt = self._programme, self._campaign.attempt
        folder = self._campaign.folder / "http"
        bodies = folder / "bodies"
        first, today, later, small = (bodies / name for name in ("first", "now", "later", "small"))
        for place in (first, today, later, small):
            place.mkdir(parents=True)
        self._first = first
        try:
            attempt("bodies for the service", lambda: self._prepare(first, today, later, small))
            attempt(f"HTTP, {programme.small.name}", lambda: self._small(folder, small))
            for form in programme.forms:
                attempt(f"HTTP, {form}", lambda form=form: self._form(folder, today, later, form))  # type: ignore[misc] # bound now
            attempt("HTTP, /healthz", lambda: self._liveness(folder, today))
        finally:
            shutil.rmtree(folder)

    def _prepare(self, first: Path, today: Path, later: Path, small: Path) -> None:
        """Write all bodies and bare problems."""
        recipe, forms = (
            self._programme.recipe,
            sorted({*self._programme.forms, self._programme.watched}),
        )
        for place, made_of, change, wanted in (
            (first, _FIRST, None, sorted({*forms, "cost table"})),
            (today, recipe, None, forms),
            (later, recipe, NEXT_DAY, ["cost table"]),
            (small, self._programme.small, None, ["cost table"]),
        ):
            self._campaign.child(
                "prepare",
                folder=str(place),
                recipe=asdict(made_of),
                change=change,
                forms=wanted,
            )

    def _use_once(self, service: Service, form: str) -> None:
        """Have everything loaded that is loaded late."""
        for each in ("cost table", form):
            service.plan((self._first / each).read_bytes(), FORMS[each][1])

    def _small(self, folder: Path, small: Path) -> None:
        """Measure a network in which the fixed costs of a run dominate."""
        programme = self._programme
        record = self._record(programme.small, "cost table, small")
        body = (small / "cost table").read_bytes()
        with serving(_data(folder)) as service:
            self._use_once(service, "cost table")
            for _ in range(programme.small_repetitions):
                self._keep(record, "served", service.plan(body, FORMS["cost table"][1]), small)

    def _form(self, folder: Path, today: Path, later: Path, form: str) -> None:
        """Measure one form: cold in a new service each time, then warm; then memory."""
        record = self._record(self._programme.recipe, form)
        media_type = FORMS[form][1]
        body = (today / form).read_bytes()
        record["body_bytes"] = len(body)
        for _ in range(self._programme.repetitions):
            self._reference(record, today)
            with serving(_data(folder)) as service:
                self._use_once(service, form)
                self._keep(record, "served", service.plan(body, media_type), today)
                if form == "cost table":
                    next_day = (later / form).read_bytes()
                    self._keep(record, "next day", service.plan(next_day, media_type), later)
        with serving(_data(folder)) as service:
            self._use_once(service, form)
            idle = service.settled_resident()
            seen: dict[str, float] = {}
            with watching("memory", service.process.pid, seen):
                served = service.plan(body, media_type)
            self._check(record, served, today)
            record["memory"] = {"idle_bytes": idle, "added_bytes": int(seen["peak_bytes"]) - idle}

    def _liveness(self, folder: Path, today: Path) -> None:
        """Ask for life while a large body is taken in and planned, and while nothing is."""
        form = self._programme.watched
        record = self._record(self._programme.recipe, f"/healthz during {form}")
        body, media_type = (today / form).read_bytes(), FORMS[form][1]
        record["health"] = []
        for _ in range(self._programme.watched_repetitions):
            with serving(_data(folder)) as service:
                self._use_once(service, form)
                idle: dict[str, float] = {}
                with watching("health", service.port, idle):
                    service.settled_resident()
                busy: dict[str, float] = {}
                with watching("health", service.port, busy):
                    served = service.plan(body, media_type)
                self._check(record, served, today)
                record["health"].append({"idle": idle, "busy": busy})

    def _reference(self, record: Record, problem: Path) -> None:
        """Measure R beside what is sent."""
        answer = self._campaign.child("solve", folder=str(problem), solver=R)
        record["objectives"].append(answer.pop("objective"))
        record["measured"].setdefault(R, []).append(answer)

    def _record(self, recipe: Recipe, what: str) -> Record:
        """Return a new record of what is sent."""
        record: Record = {
            "name": f"{recipe.name}, {what}",
            "what": what,
            "lanes": recipe.lanes,
            "measured": {},
            "objectives": [],
        }
        self.records.append(record)
        return record

    def _keep(self, record: Record, as_: str, served: Served, problem: Path) -> None:
        """Keep how long a network took."""
        self._check(record, served, problem)
        record["measured"].setdefault(as_, []).append(
            {
                "accepted_seconds": served.accepted_seconds,
                "planned_seconds": served.planned_seconds,
                "seconds": served.fetched_seconds,
                "cpu_seconds": served.cpu_seconds,
                "plan_bytes": len(served.plan),
                "plan_digest": sha256(served.plan).hexdigest(),
            }
        )

    def _check(self, record: Record, served: Served, problem: Path) -> None:
        """Note where a plan does not cost what the bare problem does."""
        document: dict[str, Any] = orjson.loads(served.plan)
        found = plan_objective(document, problem / PROBLEM)
        if problem not in self._expected:
            answer = self._campaign.child("solve", folder=str(problem), solver=R)
            self._expected[problem] = answer["objective"]
        expected = self._expected[problem]
        if found != expected:
            self._campaign.unequal.append(f"{record['name']}: costs {found}, not {expected}")


def _data(folder: Path) -> Path:
    """Return a new, empty folder for a service."""
    number = len(list(folder.glob("service-*")))
    place = folder / f"service-{number}"
    place.mkdir()
    return place
