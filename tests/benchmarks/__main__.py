"""Measure Lanewright beside other solvers: ``python3 run benchmarks``.

Goal and figure side by side. R is OR-Tools' minimum-cost flow on the full network, its arcs already
in NumPy, measured in the same run. Exit code 0: everything ran and all costs agree, whatever the
times; 1: a cost differs or a part failed. A part that is left out is named.
"""

import argparse
import sys
import tempfile
import time
from collections.abc import Sequence
from pathlib import Path

import orjson

from tests.benchmarks.campaign import Campaign
from tests.benchmarks.figures import growth
from tests.benchmarks.goals import goal_lines
from tests.benchmarks.lemon import find_lemon
from tests.benchmarks.machine import load, machine, now, versions
from tests.benchmarks.over_http import HttpCampaign
from tests.benchmarks.programmes import LONG, QUICK, STANDARD, Programme
from tests.benchmarks.report import markdown, with_block

README = Path(__file__).parents[2] / "README.md"
# Above this many processes for each core the times say more about the others than about us.
LOAD_PER_CORE_QUIET = 1.25

Document = dict[str, object]


def arguments(words: Sequence[str] | None) -> argparse.Namespace:
    """Return what the command line says."""
    parser = argparse.ArgumentParser(prog="run benchmarks", description=__doc__)
    which = parser.add_mutually_exclusive_group()
    which.add_argument("--quick", action="store_true", help="up to 100,000 lanes, a few minutes")
    which.add_argument(
        "--long", action="store_true", help="more seeds, and HiGHS at a million lanes: hours"
    )
    parser.add_argument("--minutes", type=float, help="end by then and say what is missing")
    parser.add_argument(
        "--json",
        type=Path,
        metavar="FILE",
        help="write the document there (default: standard output)",
    )
    parser.add_argument(
        "--readme", action="store_true", help="put the tables between the marks of README.md"
    )
    parser.add_argument(
        "--from",
        dest="former",
        type=Path,
        metavar="FILE",
        help="measure nothing: report a document",
    )
    return parser.parse_args(words)


def say(text: str) -> None:
    """Tell the person; standard output is for the document."""
    print(f"{time.strftime('%H:%M:%S')} {text}", file=sys.stderr, flush=True)  # noqa: T201 - it talks to a person


def measure(programme: Programme, *, minutes: float) -> Document:
    """Run ``programme``; return everything that was measured."""
    began, first_load, where = now(), load(), machine()
    if first_load > LOAD_PER_CORE_QUIET * int(str(where["cores"])):
        say(f"the machine is busy (load {first_load}): read times as upper bounds")
    with tempfile.TemporaryDirectory(prefix="benchmarks-") as name:
        folder = Path(name)
        lemon = find_lemon(folder)
        campaign = Campaign(
            folder=folder, lemon=lemon, ends_at=time.monotonic() + 60 * minutes, say=say
        )
        if lemon.absent is not None:
            campaign.leave_out("LEMON's network simplex", lemon.absent)
        for case in programme.cases:
            campaign.attempt(case.recipe.name, lambda case=case: campaign.dense(case))  # type: ignore[misc] # bound now
        for network in programme.netgen:
            campaign.attempt(
                f"NETGEN {network}",
                lambda network=network: campaign.netgen(network, repetitions=3),  # type: ignore[misc] # bound now
            )
        served = []
        if programme.serving is not None:
            http = HttpCampaign(campaign, programme.serving)
            http.run()
            served = http.records
    return {
        "format": 1,
        "programme": programme.name,
        "began": began,
        "ended": now(),
        "machine": where,
        "load": {"began": first_load, "ended": load()},
        "versions": versions(lemon.version),
        "goals": [line.to_document() for line in goal_lines(campaign.networks, served)],
        "growth": growth(campaign.networks),
        "networks": campaign.networks,
        "served": served,
        "unequal": campaign.unequal,
        "failed": campaign.failed,
        "not_run": campaign.not_run,
    }


def main(words: Sequence[str] | None = None) -> int:
    """Measure or report; return the exit code."""
    asked = arguments(words)
    if asked.former is not None:
        document = orjson.loads(asked.former.read_bytes())
    else:
        programme = QUICK if asked.quick else LONG if asked.long else STANDARD
        minutes = programme.minutes if asked.minutes is None else asked.minutes
        document = measure(programme, minutes=minutes)
        written = orjson.dumps(document, option=orjson.OPT_INDENT_2 | orjson.OPT_APPEND_NEWLINE)
        if asked.json is None:
            sys.stdout.buffer.write(written)
        else:
            asked.json.write_bytes(written)
    report = markdown(document)
    if asked.readme:
        README.write_text(with_block(README.read_text(encoding="utf-8"), report), encoding="utf-8")
    print(report, file=sys.stderr)  # noqa: T201 - it talks to a person
    return 1 if document["unequal"] or document["failed"] else 0


if __name__ == "__main__":
    sys.exit(main())
