"""Figures from what was measured: medians, ratios to R, exponents of growth."""

import math
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass
from statistics import median
from typing import Any

from tests.benchmarks.campaign import COLD, WARM, R

Record = Mapping[str, Any]
Answer = Mapping[str, Any]

# All that planning does between compiled arcs and a flow with prices, and the check of what was
# written; what remains is reading, compiling and writing.
NOT_SOLVING = frozenset({"taken in", "read", "compiled", "written", "proved"})


@dataclass(frozen=True, slots=True, kw_only=True)
class Ratio:
    """How often R fits into a figure: over networks of one kind, each by its medians."""

    median: float
    worst: float
    cpu_median: float
    networks: int


def seconds(answers: Iterable[Answer], key: str = "seconds") -> float:
    """Return the median over repetitions."""
    return float(median(answer[key] for answer in answers))


def solve_and_proof(answer: Answer, key: str = "seconds") -> float:
    """Return what finding the flow and its prices took, and checking plan and certificate."""
    return sum(
        float(taken[key])
        for phase, taken in answer["phases"].items()
        if phase not in NOT_SOLVING or phase == "proved"
    )


def whole(answer: Answer, key: str = "seconds") -> float:
    """Return what all of it took."""
    return float(answer[key])


def ratio(records: Iterable[Record], name: str, part: Callable[..., float] = whole) -> Ratio | None:
    """Return the ratio of what ``name`` took to R, None where neither was measured."""
    wall, cpu = [], []
    for record in records:
        ours, full = record["measured"].get(name), record["measured"].get(R)
        if not ours or not full:
            continue
        wall.append(median(map(part, ours)) / seconds(full))
        cpu.append(
            median(part(answer, "cpu_seconds") for answer in ours) / seconds(full, "cpu_seconds")
        )
    if not wall:
        return None
    return Ratio(median=median(wall), worst=max(wall), cpu_median=median(cpu), networks=len(wall))


def exponent(points: Iterable[tuple[float, float]]) -> float | None:
    """Return b of y = a x^b by least squares of the logarithms; None of fewer than two sizes."""
    logs = [(math.log(x), math.log(y)) for x, y in points if x > 0 and y > 0]
    if len({x for x, _ in logs}) < 2:
        return None
    mean_x = sum(x for x, _ in logs) / len(logs)
    mean_y = sum(y for _, y in logs) / len(logs)
    over = sum((x - mean_x) * (y - mean_y) for x, y in logs)
    return over / sum((x - mean_x) ** 2 for x, _ in logs)


def growth(networks: Iterable[Record]) -> dict[str, dict[str, float | None]]:
    """Return, by solver, how time and added memory grow with the number of lanes when dense."""
    dense = [record for record in networks if record["kind"] == "dense"]
    found: dict[str, dict[str, float | None]] = {}
    for name in sorted({name for record in dense for name in record["measured"]}):
        if name == WARM or name.startswith("pipeline"):
            continue
        part = solve_and_proof if name == COLD else whole
        with_it = [record for record in dense if name in record["measured"]]
        found[name] = {
            "seconds": exponent(
                (record["lanes"], median(map(part, record["measured"][name]))) for record in with_it
            ),
            "added_bytes": exponent(
                (record["lanes"], seconds(record["measured"][name], "added_bytes"))
                for record in with_it
            ),
        }
    return found


def profile(answers: Iterable[Answer]) -> dict[str, float]:
    """Return the median seconds of every phase, in their order."""
    listed = list(answers)
    return {
        phase: median(answer["phases"][phase]["seconds"] for answer in listed)
        for phase in (listed[0]["phases"] if listed else ())
    }
