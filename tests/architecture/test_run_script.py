"""The script behind the two commands, started beside a Python that only takes notes."""

import shutil
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]

# Stands for the Python of .venv: writes down how it was called, and fails where it is told to.
NOTING_PYTHON = """#!/bin/sh
echo "$@" >> "{calls}"
case "$*" in *"{fails_on}"*) exit 1;; esac
exit 0
"""

Started = Callable[..., subprocess.CompletedProcess[str]]


@pytest.fixture
def home(tmp_path: Path) -> Path:
    """Return a folder with the script, a lock and a working .venv, but nothing installed."""
    shutil.copy(ROOT / "run", tmp_path / "run")
    (tmp_path / "requirements.lock").write_text("numpy==1 --hash=sha256:0\n")
    (tmp_path / "pyproject.toml").write_text("[project]\n")
    (tmp_path / ".venv" / "bin").mkdir(parents=True)
    (tmp_path / ".venv" / "pyvenv.cfg").write_text("")
    fake(tmp_path, "python")
    fake(tmp_path, "lanewright")
    return tmp_path


def fake(home: Path, name: str, *, fails_on: str = "never said") -> None:
    """Put a program into .venv that notes its calls and fails on one."""
    path = home / ".venv" / "bin" / name
    path.write_text(NOTING_PYTHON.format(calls=home / "calls", fails_on=fails_on))
    path.chmod(0o755)


def start(home: Path, *arguments: str) -> subprocess.CompletedProcess[str]:
    """Run the script with ``arguments`` where no uv is to be found."""
    return subprocess.run(
        [sys.executable, home / "run", *arguments],
        env={"PATH": str(home / "no-programs")},
        capture_output=True,
        text=True,
        check=False,
    )


def calls(home: Path) -> list[str]:
    """Return what the programs of .venv were called with since the last look, probes left out."""
    path = home / "calls"
    lines = path.read_text().splitlines() if path.exists() else []
    path.unlink(missing_ok=True)
    return [line for line in lines if not line.startswith("-c import sys")]


def test_the_first_start_installs_what_the_lock_says_and_the_second_nothing(home: Path) -> None:
    """Everything is checked against its hash, and the second start is instant."""
    first = start(home, "demo")

    assert first.returncode == 0, first.stderr
    pip = "-m pip install --quiet --disable-pip-version-check"
    assert calls(home) == [
        "-m pip --version",
        f"{pip} --require-hashes -r {home / 'requirements.lock'}",
        f"{pip} --no-deps --no-build-isolation -e {home}",
        "demo",
    ]

    second = start(home, "demo", "--json")

    assert (second.returncode, second.stderr) == (0, "")
    assert calls(home) == ["demo --json"]


def test_a_changed_lock_is_installed(home: Path) -> None:
    """Whoever pulls a new version must not test the old packages."""
    start(home, "setup")
    (home / "requirements.lock").write_text("numpy==2 --hash=sha256:0\n")
    calls(home)

    start(home, "setup")

    assert any("--require-hashes" in call for call in calls(home))


def test_a_set_up_that_failed_runs_nothing_and_is_tried_again(home: Path) -> None:
    """Tests of half an installation would tell nothing."""
    fake(home, "python", fails_on="--require-hashes")

    failed = start(home, "tests")

    assert failed.returncode == 2
    assert "could not be installed" in failed.stderr
    assert "-m pytest" not in calls(home)

    fake(home, "python")
    assert start(home, "tests").returncode == 0
    assert calls(home)[-1] == "-m pytest"


def test_arguments_of_the_tests_reach_pytest(home: Path) -> None:
    """A developer runs one test the same way as all of them."""
    start(home, "tests", "--long", "tests/unit", "-k", "steps")

    assert calls(home)[-1] == "-m pytest --long tests/unit -k steps"


def test_arguments_of_the_benchmarks_reach_them(home: Path) -> None:
    """And nothing else is started."""
    start(home, "benchmarks", "--quick", "--json", "figures.json")

    assert calls(home)[-1] == "-m tests.benchmarks --quick --json figures.json"


def test_the_exit_code_of_the_tests_is_the_exit_code(home: Path) -> None:
    """A red test must not look green from outside."""
    fake(home, "python", fails_on="-m pytest")

    assert start(home, "tests").returncode == 1


def test_an_unknown_command_is_named(home: Path) -> None:
    """And nothing is set up for it."""
    result = start(home, "deploy")

    assert result.returncode == 2
    assert "deploy" in result.stderr
    assert calls(home) == []


def test_an_old_python_is_told_what_is_needed(home: Path) -> None:
    """The script is tried with whatever ``python3`` is on the machine."""
    script = (home / "run").read_text()
    assert "OLDEST = (3, 11)" in script
    (home / "run").write_text(script.replace("OLDEST = (3, 11)", "OLDEST = (3, 99)"))

    result = start(home, "demo")

    assert result.returncode == 2
    assert "needs 3.99 or newer" in result.stderr


def test_a_folder_that_is_no_environment_is_left_alone(home: Path) -> None:
    """Whatever lies there is not ours to delete."""
    shutil.rmtree(home / ".venv")
    (home / ".venv").mkdir()
    (home / ".venv" / "letters.txt").write_text("dear")

    result = start(home, "demo")

    assert result.returncode == 2
    assert "is no virtual environment" in result.stderr
    assert (home / ".venv" / "letters.txt").exists()
