"""The goals, each beside its figure; one that was not measured says so."""

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import asdict, dataclass
from statistics import median
from typing import Any, Final, Literal

from tests.benchmarks.campaign import COLD, WARM
from tests.benchmarks.figures import Ratio, ratio, solve_and_proof

Record = Mapping[str, Any]
Verdict = Literal["stretch", "met", "missed", "not run"]

MILLION: Final = 1_000_000
MB: Final = 1_000_000


@dataclass(frozen=True, slots=True, kw_only=True)
class Line:
    """One goal and what was measured. Less is better; ``stretch`` None: there is none."""

    what: str
    unit: str
    figure: float | None
    goal: float
    stretch: float | None
    detail: str

    @property
    def verdict(self) -> Verdict:
        """Return how the figure stands to the goal."""
        if self.figure is None:
            return "not run"
        if self.stretch is not None and self.figure <= self.stretch:
            return "stretch"
        return "met" if self.figure <= self.goal else "missed"

    def to_document(self) -> dict[str, object]:
        """Return the line with its verdict."""
        return {**asdict(self), "verdict": self.verdict}


def goal_lines(networks: Sequence[Record], served: Sequence[Record]) -> list[Line]:
    """Return every goal in its order."""
    million = _of(networks, "dense", MILLION)
    capped = [r for r in networks if "capped" in r["kind"] and r["lanes"] == MILLION]
    large = _of(networks, "dense", 10 * MILLION)
    after = [r for r in networks if WARM in r["measured"] and r["lanes"] == MILLION]
    usual = [r for r in after if r["kind"] == "demand 10 %"]
    large_after = [r for r in networks if WARM in r["measured"] and r["lanes"] == 10 * MILLION]
    cold, warm = "solve + proof, cold, 1M lanes", "solve + proof, warm, 1M lanes"
    return [
        _line(f"{cold}, worst", 0.25, 0.15, _solving(million, COLD), worst=True),
        _line(f"{cold}, 30 % capped, worst", 0.30, 0.2, _solving(capped, COLD), worst=True),
        _line(f"{warm}, demand +-10 %, median", 0.07, 0.04, _solving(usual, WARM)),
        _line(f"{warm}, any change, worst", 0.13, None, _solving(after, WARM), worst=True),
        _line(
            "solve + proof, cold, 10M lanes, worst", 0.15, None, _solving(large, COLD), worst=True
        ),
        _line("solve + proof, warm, 10M lanes, median", 0.05, None, _solving(large_after, WARM)),
        *(
            _line(f"HTTP, 1M lanes, {form}", goal, stretch, ratio(_sent(served, form), "served"))
            for form, goal, stretch in (
                ("cost table", 0.6, 0.4),
                ("columns", 1.0, 0.8),
                ("Parquet", 0.5, 0.25),
                ("Arrow", 0.5, 0.25),
                ("rows", 2.5, 1.5),
            )
        ),
        _small(served),
        _memory(served, "cost table", 150, 100),
        _memory(served, "rows", 600, None),
        _liveness(served),
        _large_memory(networks),
    ]


def _of(networks: Iterable[Record], kind: str, lanes: int) -> list[Record]:
    """Return the networks of a kind and size."""
    return [r for r in networks if r["kind"] == kind and r["lanes"] == lanes]


def _sent(served: Iterable[Record], what: str) -> list[Record]:
    """Return what was sent in a form, of a million lanes."""
    return [r for r in served if r["what"] == what and r["lanes"] == MILLION]


def _solving(records: list[Record], name: str) -> Ratio | None:
    """Return solve and proof of ``name`` in terms of R."""
    return ratio(records, name, solve_and_proof)


def _line(
    what: str, goal: float, stretch: float | None, found: Ratio | None, *, worst: bool = False
) -> Line:
    """Return a goal that is told in terms of R."""
    detail = ""
    if found is not None:
        detail = f"median {found.median:.3f}, worst {found.worst:.3f}, of {found.networks}; "
        detail += f"processor {found.cpu_median:.3f}"
    figure = None if found is None else (found.worst if worst else found.median)
    return Line(what=what, unit="R", figure=figure, goal=goal, stretch=stretch, detail=detail)


def _small(served: Sequence[Record]) -> Line:
    """Return the goal of networks in which the fixed costs dominate."""
    answers = [
        answer
        for r in served
        if r["what"] == "cost table, small" and r["lanes"] == 10_000
        for answer in r["measured"].get("served", ())
    ]
    figure = detail = None
    if answers:
        # The kernel counts in hundredths of a second: only the mean of many says anything.
        figure = 1000 * sum(answer["cpu_seconds"] for answer in answers) / len(answers)
        wall = 1000 * median(answer["seconds"] for answer in answers)
        detail = f"mean of {len(answers)}; {wall:.0f} ms until the plan is there"
    return Line(
        what="HTTP, 10,000 lanes, cost table, time of the server",
        unit="ms",
        figure=figure,
        goal=30,
        stretch=20,
        detail=detail or "",
    )


def _memory(served: Sequence[Record], form: str, goal: float, stretch: float | None) -> Line:
    """Return the goal of memory over the idle service."""
    found = [r["memory"] for r in _sent(served, form) if "memory" in r]
    figure = max((each["added_bytes"] / MB for each in found), default=None)
    idle = ", ".join(f"idle {each['idle_bytes'] / MB:.0f} MB" for each in found)
    return Line(
        what=f"peak memory over the idle service, 1M lanes, {form}",
        unit="MB",
        figure=figure,
        goal=goal,
        stretch=stretch,
        detail=idle,
    )


def _liveness(served: Sequence[Record]) -> Line:
    """Return the goal of ``/healthz`` while a million rows are taken in and planned."""
    seen = [each for r in served if r["lanes"] == MILLION for each in r.get("health", ())]
    figure = max((1000 * each["busy"]["p99_seconds"] for each in seen), default=None)
    detail = "; ".join(
        f"{each['busy']['count']} answers, "
        f"longest {1000 * each['busy']['longest_seconds']:.0f} ms, "
        f"idle p99 {1000 * each['idle']['p99_seconds']:.1f} ms"
        for each in seen[:1]
    )
    return Line(
        what="p99 of /healthz while 1M rows are taken in and planned, worst",
        unit="ms",
        figure=figure,
        goal=50,
        stretch=None,
        detail=detail,
    )


def _large_memory(networks: Sequence[Record]) -> Line:
    """Return the goal of memory for ten million lanes from Parquet."""
    name = "pipeline, Parquet"
    found = [
        answer["peak_bytes"] / 2**30
        for r in _of(networks, "dense", 10 * MILLION)
        for answer in r["measured"].get(name, ())
    ]
    return Line(
        what="peak memory of the process, 10M lanes from Parquet, taken in and planned",
        unit="GiB",
        figure=max(found, default=None),
        goal=4,
        stretch=None,
        detail="",
    )
