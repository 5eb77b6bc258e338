"""The commands: exit codes, and what goes to which stream. The work behind them is a fake."""

import json
from pathlib import Path

import orjson
import pytest

from service.doors.command_line.backing import Audit
from service.network.options import Options
from service.runs.faults import ChildCrashed, ChildMemory, ChildTimeout
from tests.doors.command_line.work import DIGEST, FAULT, REFUSED, FakeWork, Run, a_plan


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
