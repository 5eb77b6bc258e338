"""The commands: exit codes, and what goes to which stream. The work behind them is a fake."""

import json
from collections.abc import Callable, Mapping
from contextlib import AbstractContextManager
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, Literal

import orjson
import pytest

from service.doors.command_line.backing import Audit, Backing, NotReadyError, OnProgress
from service.doors.command_line.commands import run_command
from service.network.faults import Fault, Status
from service.network.intake import IntakeReport
from service.network.options import Options
from service.planning.outcome import Outcome
from service.runs.faults import ChildCrashed, ChildMemory, ChildTimeout
from service.runs.ports import Application

DIGEST = "sha-256:" + "0" * 64
SUMMARY: Mapping[str, object] = {
    "cautions": [],
    "set_aside": [],
    "counts": {"items": 1, "sites": 2, "supply_rows": 1, "demand_rows": 1, "lanes": 1},
    "network_digest": DIGEST,
}
ACCEPTED = IntakeReport(faults=(), fault_count=0, status=Status.ACCEPTED, summary=SUMMARY)
FAULT = Fault(
    pointer="/lanes/3/origin", code="unknown_site", detail="There is no such site.", value="NORHT"
)
REFUSED = IntakeReport(faults=(FAULT,), fault_count=7, status=Status.INVALID, summary=None)


def a_plan(*, short: bool = False, status: str = "planned") -> dict[str, Any]:
    """Return the smallest plan document that the commands can show."""
    reason = {"detail": "More is forced than can come in.", "items": []}
    shortage = {
        "reference": "SO-1",
        "site": "Y",
        "item": "A",
        "priority": 5,
        "quantity": "1",
        "reason": "no_stock",
    }
    return {
        "status": status,
        "name": None,
        "currency": "EUR",
        "cut_off": "2026-02-03T16:00:00+01:00",
        "network_digest": DIGEST,
        "total_cost_rounded": "0.00",
        "cost_parts": {},
        "totals": {"lines_complete": 1, "lines_in_part": 0, "lines_none": 0, "quantities": []},
        "plan_lines": [],
        "order_lines": [{"reference": "SO-1", "quantity": "3", "priority": 5}],
        "consignments": [],
        "shortages": [shortage] if short else [],
        "site_use": [{"site": "N", "item": "A", "available": "9"}],
        "rules_in_force": [],
        "set_aside": [],
        "warnings": [],
        "certificate": {"lexicographic": "proved", "gap": "0", "lower_bound": "0"},
        "reason": reason,
    }


@dataclass
class FakeWork:
    """Answers as told and remembers what it was asked."""

    report: IntakeReport | Exception = ACCEPTED
    plan: Mapping[str, Any] = field(default_factory=a_plan)
    state: Literal["planned", "no_plan", "failed"] = "planned"
    failure: Exception | None = None
    audit: Audit = field(default_factory=lambda: Audit(verdict="intact", problems=()))
    asked: dict[str, object] = field(default_factory=dict)

    def check(
        self,
        spool: Path,
        folder: Path,
        *,
        options: Options,
        media_type: str,
        content_encoding: str | None,
    ) -> IntakeReport:
        """Be the input check."""
        del folder
        self.asked |= {
            "body": spool.read_bytes(),
            "options": options,
            "media_type": media_type,
            "content_encoding": content_encoding,
        }
        if isinstance(self.report, Exception):
            raise self.report
        return self.report

    def solve(
        self, source: Path, target: Path, *, options: Options, on_progress: OnProgress
    ) -> Outcome:
        """Be the planning."""
        del source, options
        on_progress("read", {})
        if self.failure is not None:
            raise self.failure
        (target / "plan.json").write_bytes(orjson.dumps(self.plan))
        failed = self.state == "failed"
        return Outcome(
            state=self.state,
            reason="numbers_too_large" if failed else None,
            detail="Lane L1 costs too much." if failed else None,
            seconds={},
        )

    def serve(self, *, port: int | None) -> None:
        """Be a service that cannot start."""
        raise NotReadyError(f"port {port} is taken")

    def application(self) -> AbstractContextManager[Application]:
        """Be a store that is in use."""
        raise NotReadyError("another process executes its runs")

    def backing(self) -> Backing:
        """Return the work as the commands receive it."""
        return Backing(
            intake=self.check,
            plan=self.solve,
            application=self.application,
            serve=self.serve,
            migrate=lambda: ["0001"],
            audit=lambda: self.audit,
            address=lambda: "http://127.0.0.1:8080",
        )


Run = Callable[..., tuple[int, str, str]]


@pytest.fixture
def run(capfdbinary: pytest.CaptureFixture[bytes]) -> Run:
    """Return how to run a command: arguments and work in, exit code and both streams out."""

    def run_it(*arguments: object, work: FakeWork | None = None) -> tuple[int, str, str]:
        code = run_command([str(a) for a in arguments], (work or FakeWork()).backing())
        out, err = capfdbinary.readouterr()
        return code, out.decode(), err.decode()

    return run_it


@pytest.fixture
def network(tmp_path: Path) -> Path:
    """Return a file to be planned; the fake does not read it."""
    path = tmp_path / "network.json"
    path.write_bytes(b"{}")
    return path


def test_a_plan_is_shown_on_standard_output_alone(run: Run, network: Path) -> None:
    """What is redirected to a file must be the answer and nothing else."""
    code, out, err = run("solve", network)

    assert code == 0
    assert out.startswith("cut-off Tue 3 Feb 2026 16:00 +01:00\n\n1 order line.")
    assert err == ""


def test_json_is_the_plan_byte_for_byte(run: Run, network: Path) -> None:
    """The digest of a plan is taken over its bytes, so no door may write it anew."""
    code, out, _ = run("solve", network, "--json")

    assert code == 0
    assert out == orjson.dumps(a_plan()).decode() + "\n"


def test_a_table_comes_as_csv(run: Run, network: Path) -> None:
    """Spreadsheets read it as it is."""
    code, out, _ = run("solve", network, "--csv", "site_use")

    assert code == 0
    assert out == "site,item,available,shipped,kept,left\r\nN,A,9,,,\r\n"


def test_standard_input_and_options_reach_the_check(
    run: Run, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Both spellings of an option are the same option."""
    source = tmp_path / "piped"
    source.write_bytes(b"the body")
    work = FakeWork()

    with source.open() as stream:
        monkeypatch.setattr("sys.stdin", stream)
        code, _, _ = run(
            "solve", "-", "--bad_rows", "set_aside", "--deadline-seconds", "7", work=work
        )

    assert code == 0
    assert work.asked["body"] == b"the body"
    assert work.asked["options"] == Options(bad_rows="set_aside", deadline_seconds=7)


def test_the_name_of_a_file_says_what_it_is(run: Run, tmp_path: Path) -> None:
    """A packed network needs no option to be read."""
    packed = tmp_path / "network.json.gz"
    packed.write_bytes(b"")
    work = FakeWork()

    run("check", packed, work=work)

    assert (work.asked["media_type"], work.asked["content_encoding"]) == (
        "application/json",
        "gzip",
    )


def test_faults_are_read_by_a_person_on_standard_error(run: Run, network: Path) -> None:
    """Place, value, what is wrong, what to do, and how many more there are."""
    code, out, err = run("check", network, work=FakeWork(report=REFUSED))

    assert (code, out) == (2, "")
    assert err.splitlines() == [
        "lanewright: the network is invalid: 7 faults",
        "  /lanes/3/origin (it says 'NORHT')",
        "      There is no such site. [unknown_site]",
        "  and 6 more",
    ]


def test_faults_are_read_by_a_program_as_json(run: Run, network: Path) -> None:
    """The same document as the errors of the HTTP interface."""
    code, out, _ = run("solve", network, "--json", work=FakeWork(report=REFUSED))

    document = json.loads(out)
    assert code == 2
    assert document["status"] == "invalid"
    assert document["fault_count"] == 7
    assert document["errors"] == [FAULT.to_document()]


def test_an_accepted_network_is_counted(run: Run, network: Path) -> None:
    """The counts tell whether the extract was whole."""
    code, out, _ = run("check", network)

    assert code == 0
    assert out.splitlines() == [
        "Nothing is wrong: 1 item, 2 sites, 1 supply row, 1 demand row, 1 lane.",
        f"Network {DIGEST}",
    ]


@pytest.mark.parametrize(
    ("arguments", "work", "code"),
    [
        ((), FakeWork(plan=a_plan(short=True)), 0),
        (("--require-complete",), FakeWork(plan=a_plan(short=True)), 4),
        (("--require-complete",), FakeWork(), 0),
        ((), FakeWork(plan=a_plan(status="no_plan"), state="no_plan"), 3),
        ((), FakeWork(state="failed"), 1),
        ((), FakeWork(failure=ChildTimeout()), 1),
        ((), FakeWork(failure=ChildMemory()), 1),
        ((), FakeWork(failure=ChildCrashed("signal 11")), 1),
        ((), FakeWork(report=ChildMemory()), 2),
        ((), FakeWork(report=ChildTimeout()), 1),
        ((), FakeWork(report=ChildCrashed("signal 9")), 1),
        (("--shortages", "maybe"), FakeWork(), 2),
        (("--csv", "everything"), FakeWork(), 2),
        (("--csv", "shortages", "--json"), FakeWork(), 2),
        (("--colour",), FakeWork(), 2),
        ((), FakeWork(failure=KeyboardInterrupt()), 130),  # type: ignore[arg-type] # what Ctrl-C raises
    ],
)
def test_the_exit_code_says_how_it_ended(
    run: Run, network: Path, arguments: tuple[str, ...], work: FakeWork, code: int
) -> None:
    """Scripts read nothing else: 0 done, 1 failed, 2 input or usage, 3 no plan, 4 incomplete."""
    assert run("solve", network, *arguments, work=work)[0] == code


def test_an_option_of_a_later_version_is_refused_by_name(run: Run, network: Path) -> None:
    """Somebody who read the interface must learn that it is not built, not that it is unknown."""
    code, _, err = run("solve", network, "--gap", "0.01")

    assert code == 2
    assert "option gap" in err
    assert "[not_yet]" in err


def test_a_file_that_is_not_there_is_bad_input(run: Run, tmp_path: Path) -> None:
    """And its name is in the message."""
    code, _, err = run("solve", tmp_path / "nowhere.json")

    assert code == 2
    assert "nowhere.json cannot be read" in err


@pytest.mark.parametrize(("verdict", "code"), [("intact", 0), ("broken", 1), ("unreadable", 2)])
def test_an_audit_ends_like_a_verification(run: Run, verdict: str, code: int) -> None:
    """One convention for everything that checks."""
    problem = {"code": "chain", "place": "run:1 event 2", "detail": "The hash differs."}
    work = FakeWork(audit=Audit(verdict=verdict, problems=(problem,)))

    found, out, _ = run("audit", "check", work=work)

    assert found == code
    assert out.splitlines() == [verdict, "  run:1 event 2: The hash differs. [chain]"]


def test_a_command_that_cannot_start_says_why(run: Run) -> None:
    """A traceback tells an operator nothing."""
    assert run("serve", "--port", "7") == (1, "", "lanewright: port 7 is taken\n")
    assert run("demo") == (1, "", "lanewright: another process executes its runs\n")


def test_migrations_that_were_applied_are_named(run: Run) -> None:
    """An operator notes what an update did to the database."""
    code, out, _ = run("migrate")

    assert (code, out) == (0, "Applied 0001. The database is up to date.\n")


@pytest.mark.parametrize(
    "command", ["solve", "check", "verify", "demo", "serve", "migrate", "audit check"]
)
def test_every_command_explains_itself_with_an_example(run: Run, command: str) -> None:
    """Nobody should need this repository to use the program."""
    code, out, _ = run(*command.split(), "--help")

    assert code == 0
    assert "Example:" in out
    assert f"lanewright {command}" in " ".join(out.split())


def test_the_demo_network_can_be_had_as_a_file(run: Run) -> None:
    """The shortest way to a first network of one's own."""
    code, out, _ = run("demo", "--json")

    assert code == 0
    assert json.loads(out)["format"] == 1
