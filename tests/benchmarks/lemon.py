"""LEMON's network simplex, where its headers and a compiler are installed; else said to be absent.

LEMON is a C++ library of headers. The small program beside this file is compiled into a temporary
folder; nothing of it is kept.
"""

import re
import shutil
import subprocess
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import orjson

from tests.benchmarks.problems import Problem

LEMON_PROBLEM = "problem.lemon"
SOURCE = Path(__file__).with_name("lemon.cpp")
HEADERS_ABSENT = "no headers of LEMON (on Debian: apt-get install liblemon-dev)"
COMPILE_SECONDS_MAX = 120
# What LEMON 1.3 needs was taken out of C++ in 2020. Only templates: so that nothing is linked.
_FLAGS = ("-std=c++17", "-O3", "-march=native", "-DNDEBUG", "-DLEMON_ONLY_TEMPLATES", "-w")


@dataclass(frozen=True, slots=True, kw_only=True)
class Lemon:
    """The compiled program, or why there is none."""

    program: Path | None
    version: str | None
    absent: str | None

    def solve(self, problem: Path, *, seconds_max: float) -> dict[str, Any]:
        """Solve a file of ``write_problem``; return what the program says.

        Raises ``subprocess.SubprocessError`` where it fails or takes too long.
        """
        assert self.program is not None  # whoever asks has looked
        done = subprocess.run(
            [self.program, problem], capture_output=True, timeout=seconds_max, check=True
        )
        answer: dict[str, Any] = orjson.loads(done.stdout)
        return answer


def find_lemon(folder: Path) -> Lemon:
    """Compile the program into ``folder`` if that is possible here."""
    compiler = shutil.which("g++")
    if compiler is None:
        return Lemon(program=None, version=None, absent="no g++")
    probe = subprocess.run(
        [compiler, "-E", "-dM", "-x", "c++", "-include", "lemon/config.h", "/dev/null"],
        capture_output=True,
        text=True,
        timeout=COMPILE_SECONDS_MAX,
        check=False,
    )
    if probe.returncode != 0:
        return Lemon(program=None, version=None, absent=HEADERS_ABSENT)
    found = re.search(r'LEMON_VERSION "([^"]+)"', probe.stdout)
    program = folder / "lemon"
    made = subprocess.run(
        [compiler, *_FLAGS, "-o", program, SOURCE],
        capture_output=True,
        text=True,
        timeout=COMPILE_SECONDS_MAX,
        check=False,
    )
    if made.returncode != 0:
        reason = f"it does not compile here: {made.stderr.strip()[-300:]}"
        return Lemon(program=None, version=None, absent=reason)
    return Lemon(program=program, version=found[1] if found else "unknown", absent=None)


def write_problem(problem: Problem, path: Path) -> None:
    """Write ``problem`` in the form that the program reads."""
    with path.open("wb") as file:
        for column, form in (
            (np.array([problem.nodes, problem.tail.shape[0]]), np.int64),
            (problem.tail, np.int32),
            (problem.head, np.int32),
            (problem.capacity, np.int64),
            (problem.cost, np.int64),
            (problem.supply, np.int64),
        ):
            file.write(np.ascontiguousarray(column, form).tobytes())
