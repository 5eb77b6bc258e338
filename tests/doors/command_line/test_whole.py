"""The program as a person starts it: real children, a real store, a real service."""

import csv
import io
import json
import os
import re
import shlex
import subprocess
import sys
import urllib.request
from collections import Counter, defaultdict
from collections.abc import Iterator
from contextlib import contextmanager
from fractions import Fraction
from pathlib import Path
from typing import Any

import pytest

ROOT = Path(__file__).parents[3]
PROGRAM = Path(sys.executable).with_name("lanewright")
SECONDS_MAX = 120


def environment(folder: Path) -> dict[str, str]:
    """Return an environment in which everything lies in ``folder``."""
    kept = {name: os.environ[name] for name in ("PATH", "HOME", "LANG") if name in os.environ}
    return kept | {"LANEWRIGHT_DATA": str(folder / "data"), "LANEWRIGHT_PORT": "0"}


def lanewright(folder: Path, *arguments: object) -> subprocess.CompletedProcess[str]:
    """Run a command to its end in ``folder``."""
    return subprocess.run(
        [PROGRAM, *map(str, arguments)],
        cwd=folder,
        env=environment(folder),
        capture_output=True,
        text=True,
        timeout=SECONDS_MAX,
        check=False,
    )


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Return a folder with the demo network, its plan and its evidence."""
    place = tmp_path_factory.mktemp("island")
    demo = lanewright(place, "demo", "--json")
    assert demo.returncode == 0, demo.stderr
    (place / "network.json").write_text(demo.stdout)
    arguments = ("network.json", "--json", "--evidence", "evidence.zip")
    solved = lanewright(place, "solve", *arguments)
    assert solved.returncode == 0, solved.stderr
    (place / "plan.json").write_text(solved.stdout)
    return place


@pytest.fixture(scope="module")
def plan(folder: Path) -> dict[str, Any]:
    """Return the plan of the demo network."""
    document: dict[str, Any] = json.loads((folder / "plan.json").read_text())
    return document


def test_the_island_is_what_the_demo_promises(folder: Path) -> None:
    """5 depots, 2 cross-docks, about 40 yards, 4 items, about 300 order lines."""
    network = json.loads((folder / "network.json").read_text())

    roles = Counter(site["roles"][0] for site in network["sites"])
    assert roles == {"warehouse": 5, "cross_dock": 2, "ship_to": 40}
    assert len(network["items"]) == 4
    assert 280 <= len(network["demand"]) <= 320
    assert len({site["name"] for site in network["sites"]}) == 47


def test_one_item_is_scarce_and_the_urgent_are_served_first(plan: dict[str, Any]) -> None:
    """31 020 bags are wanted and 26 300 are there: short by 4 720 at least, and only at the end."""
    short: defaultdict[str, Fraction] = defaultdict(Fraction)
    by_priority: defaultdict[int | None, Fraction] = defaultdict(Fraction)
    for row in plan["order_lines"]:
        short[row["item"]] += Fraction(row["short"])
        if row["item"] == "ROAD-25":
            by_priority[row["priority"]] += Fraction(row["short"])

    assert short["ROAD-25"] >= 4720
    assert short["ROAD-LOOSE"] == short["GRIT-10"] == 0
    assert by_priority[1] == by_priority[2] == 0
    assert by_priority[5] > 0


def test_the_demo_shows_what_a_plan_can_say(plan: dict[str, Any]) -> None:
    """A closure, a throughput that binds, stock that is kept, goods through a cross-dock."""
    rules = {rule["id"]: rule for rule in plan["rules_in_force"]}
    assert rules["SLIDE"]["applied"]
    assert rules["NIGHT-CREW"]["binding"]
    assert {row["kept"] for row in plan["site_use"]} != {"0"}
    legs = {len(source["legs"]) for row in plan["order_lines"] for source in row["sources"]}
    assert legs >= {1, 2}
    assert not any(
        row["lane"] and row["lane"].startswith("VELQUAR:20") for row in plan["plan_lines"]
    )


def test_the_plan_adds_up_to_its_total(plan: dict[str, Any]) -> None:
    """To the last decimal: the sum over the lines, and over the parts."""
    lines = sum(Fraction(row["cost"]) for row in plan["plan_lines"])
    shortage = Fraction(plan["cost_parts"]["shortage"])

    assert lines + shortage == Fraction(plan["total_cost"])
    assert sum(map(Fraction, plan["cost_parts"].values())) == Fraction(plan["total_cost"])


def test_the_summary_fits_a_screen(folder: Path) -> None:
    """About thirty lines of at most a hundred columns."""
    result = lanewright(folder, "solve", "network.json")

    lines = result.stdout.splitlines()
    assert result.returncode == 0, result.stderr
    assert result.stderr == ""
    assert len(lines) <= 36
    assert max(map(len, lines)) <= 100


def test_a_table_has_a_row_for_each_line(folder: Path, plan: dict[str, Any]) -> None:
    """What a spreadsheet shows is what the plan says."""
    result = lanewright(folder, "solve", "network.json", "--csv", "plan_lines")

    rows = list(csv.DictReader(io.StringIO(result.stdout)))
    assert [row["cost"] for row in rows] == [line["cost"] for line in plan["plan_lines"]]


def test_the_evidence_is_intact_for_both_verifiers(folder: Path, tmp_path: Path) -> None:
    """The one that comes with the service and the one that comes with the evidence agree."""
    ours = lanewright(folder, "verify", "evidence.zip")
    subprocess.run(
        [sys.executable, "-m", "zipfile", "-e", folder / "evidence.zip", tmp_path], check=True
    )
    theirs = subprocess.run(
        [sys.executable, "-I", tmp_path / "verify.py", folder / "evidence.zip"],
        capture_output=True,
        text=True,
        check=False,
    )

    assert (ours.returncode, ours.stdout) == (0, "intact\n")
    assert theirs.returncode == 0, theirs.stdout


@pytest.mark.parametrize(
    "arguments",
    [
        ("check", "network.json"),
        ("solve", "network.json", "--evidence", "again.zip"),
        ("verify", "evidence.zip"),
    ],
)
def test_planning_and_checking_load_no_database(folder: Path, arguments: tuple[str, ...]) -> None:
    """They must run where there is none, and must not be able to reach one."""
    code = (
        "import atexit, sys\n"
        "atexit.register(lambda: print(*sorted(sys.modules), file=sys.stderr))\n"
        "from service.main import main\n"
        "main()\n"
    )
    result = subprocess.run(
        [sys.executable, "-c", code, *arguments],
        cwd=folder,
        env=environment(folder),
        capture_output=True,
        text=True,
        check=False,
    )

    assert result.returncode == 0, result.stderr
    loaded = {name.partition(".")[0] for name in result.stderr.split()}
    assert "service" in loaded
    assert loaded & {"sqlalchemy", "alembic", "psycopg", "fastapi", "uvicorn", "ortools"} == set()
    assert not (folder / "data").exists()


@contextmanager
def served(folder: Path) -> Iterator[str]:
    """Serve the store in ``folder`` on a free port; end as an operator would, and orderly."""
    with subprocess.Popen(
        [PROGRAM, "serve"],
        cwd=folder,
        env=environment(folder),
        stderr=subprocess.PIPE,
        text=True,
    ) as process:
        assert process.stderr is not None
        for line in process.stderr:
            found = re.search(r"serving at (\S+),", line)
            if found:
                break
        else:
            raise AssertionError("the service did not start")
        try:
            yield found.group(1)
        finally:
            process.terminate()
            log = process.stderr.read()
            code = process.wait(timeout=SECONDS_MAX)
    assert code == 0, log


@pytest.fixture(scope="module")
def stored(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, str, str]:
    """Return a folder where the demo was run, what it printed, and the id of its run."""
    place = tmp_path_factory.mktemp("stored")
    result = lanewright(place, "demo")
    assert result.returncode == 0, result.stderr
    (run_id,) = set(re.findall(r"run_[0-9a-v]{26}", result.stdout))
    return place, result.stdout, run_id


def test_the_demo_stores_what_it_shows(stored: tuple[Path, str, str]) -> None:
    """The summary is that of solve, with the number of the run; the store is sound."""
    folder, shown, _ = stored

    assert "run 2026-02-03/1" in shown.splitlines()[0]
    assert "Proved:" in shown
    audit = lanewright(folder, "audit", "check", "--json")
    assert json.loads(audit.stdout) == {"verdict": "intact", "problems": []}
    assert audit.returncode == 0


def test_an_audit_of_nothing_makes_nothing(tmp_path: Path) -> None:
    """A mistyped folder must not look like an empty, intact store."""
    result = lanewright(tmp_path, "audit", "check")

    assert result.returncode == 2
    assert result.stdout.startswith("unreadable\n")
    assert not (tmp_path / "data").exists()


def test_the_service_answers_what_the_readme_asks(stored: tuple[Path, str, str]) -> None:
    """Every curl line of the README, word by word, against the run of the demo."""
    folder, _, run_id = stored
    (folder / "network.json").write_text(lanewright(folder, "demo", "--json").stdout)
    readme = (ROOT / "README.md").read_text(encoding="utf-8")
    lines = re.findall(r"^\$ (curl .+)$", readme, flags=re.MULTILINE)
    assert len(lines) == 8

    with served(folder) as address:
        answers = [curl(line, folder, address, run_id) for line in lines]
        docs = curl(f"curl {address}/docs", folder, address, run_id)

    assert [status for status, _ in answers] == [202, 200, 200, 200, 200, 200, 200, 200]
    assert json.loads(answers[1][1])["state"] == "planned"
    assert json.loads(answers[2][1])["status"] == "planned"
    assert answers[3][1].startswith(b"reference,site,item,priority")
    assert (folder / "template.xlsx").read_bytes()[:2] == b"PK"
    assert (folder / "evidence.zip").read_bytes()[:2] == b"PK"
    assert docs[0] == 200


def curl(line: str, folder: Path, address: str, run_id: str) -> tuple[int, bytes]:
    """Do what a curl command of the README says; return status and body.

    The options it may use are few and written out here: another one fails the test.
    """
    line = line.replace("http://127.0.0.1:8080", address).replace("RUN", run_id)
    words = iter(shlex.split(line)[1:])
    headers: dict[str, str] = {}
    body: bytes | None = None
    target: str | None = None
    url = ""
    for word in words:
        match word:
            case "-i":
                pass
            case "-H":
                name, _, value = next(words).partition(": ")
                headers[name] = value
            case "--data-binary":
                body = (folder / next(words).removeprefix("@")).read_bytes()
            case "-o":
                target = next(words)
            case _:
                assert word.startswith("http://"), word
                url = word
    request = urllib.request.Request(url, data=body, headers=headers)  # noqa: S310 - loopback
    with urllib.request.urlopen(request, timeout=SECONDS_MAX) as answer:  # noqa: S310 - loopback
        content = answer.read()
        if target is not None:
            (folder / target).write_bytes(content)
        return answer.status, content


def test_a_second_process_is_told_that_the_store_is_in_use(
    stored: tuple[Path, str, str],
) -> None:
    """Two executors of one file would each plan what the other has begun."""
    folder, _, _ = stored

    with served(folder):
        result = lanewright(folder, "demo")

    assert result.returncode == 1
    assert "another process executes its runs" in result.stderr
