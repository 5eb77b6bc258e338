"""Runs for tests of store and use cases: small, but with true digests everywhere."""

import hashlib
from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path

import orjson

from service.network.canonical import canonical_json
from service.network.options import Options
from service.network.stored_zip import write_stored_zip
from service.planning.outcome import FailureReason, Outcome, State
from service.runs.execute import Execute
from service.runs.ports import Store
from service.runs.run import LOCAL, Actor, Claim, Progress, Run, RunId, Token
from service.runs.submit import Submit

WORKLOAD = {
    "items": 1,
    "sites": 2,
    "supply_rows": 1,
    "order_lines": 1,
    "lanes": 8,
    "usable_lanes": 8,
    "usable_lanes_of_one": 8,
    "places": 2,
    "file_bytes": 1000,
}
WIRE_DIGEST = "sha-256:" + "a" * 64


def sha256(content: bytes) -> str:
    """Return the digest of ``content`` as the house writes it."""
    return "sha-256:" + hashlib.sha256(content).hexdigest()


def intake_folder(
    folder: Path,
    *,
    body: bytes = b'{"format":1}',
    plan_for: str = "2026-02-03",
    likeness: str = "sha-256:" + "b" * 64,
) -> Path:
    """Write what intake leaves behind; the network has one column, for its digest."""
    folder.mkdir(parents=True, exist_ok=True)
    column = hashlib.sha256(body).digest()
    head = canonical_json(
        {
            "format": 1,
            "currency": "EUR",
            "tables": {
                "lanes": {
                    "rows": 8,
                    "columns": {"origin": {"type": "code", "digest": sha256(column)}},
                }
            },
        },
    )
    entries = {"network/head.json": head, "network/lanes/origin": column}
    write_stored_zip(folder / "network.zip", entries)
    (folder / "received").write_bytes(body)
    summary: dict[str, object] = {
        "cautions": [],
        "set_aside": [],
        "counts": {"items": 1, "sites": 2, "supply_rows": 1, "demand_rows": 1, "lanes": 8},
        "request_digest": sha256(body),
        "network_digest": sha256(head),
        "currency": "EUR",
        "cut_off": "2026-02-03T16:00:00+01:00",
        "plan_for": plan_for,
        "name": None,
        "likeness": likeness,
        "workload": WORKLOAD,
    }
    (folder / "intake.json").write_bytes(orjson.dumps(summary))
    return folder


def outcome(
    state: State = "planned",
    *,
    reason: FailureReason | None = None,
    detail: str | None = None,
) -> Outcome:
    """Return what a planning child answers."""
    return Outcome(
        state=state,
        reason=reason,
        detail=detail,
        seconds={"read": 0.25, "solved": 0.5},
    )


@dataclass(slots=True, kw_only=True)
class FakePlanner:
    """Writes a small plan of the network it was given, or does what a test tells it to."""

    outcome: Outcome = field(default_factory=outcome)
    instead: Callable[[Claim], object] | None = None
    lines: int = 2
    seen: list[Claim] = field(default_factory=list)
    told: Progress | None = None
    warm_start: bytes | None = b"prices"
    started_from: list[bytes | None] = field(default_factory=list)

    def progress(self, token: Token) -> Progress | None:
        """Return what a test wants told."""
        assert self.seen[-1].token == token
        return self.told

    def plan(self, claim: Claim, source: Path, options: Options, target: Path) -> Outcome:
        """Plan as the real one would: files in, files out."""
        self.seen.append(claim)
        warm = source / "warm_start"
        self.started_from.append(warm.read_bytes() if warm.exists() else None)
        if self.instead is not None:
            self.instead(claim)
        intake = orjson.loads((source / "intake.json").read_bytes())
        plan = {
            "format": 1,
            "status": self.outcome.state,
            "network_digest": intake["network_digest"],
            "options_digest": sha256(canonical_json(options.to_document())),
            "plan_lines": [
                {"lane": f"L{n}", "origin": "A", "destination": "B", "item": "I", "quantity": "4"}
                for n in range(self.lines)
            ],
            "order_lines": [
                {
                    "reference": f"#{n}",
                    "site": "B",
                    "item": "I",
                    "quantity": "4",
                    "served": "3.5",
                    "short": "0.5",
                }
                for n in range(self.lines)
            ],
        }
        if self.outcome.state != "failed" or self.outcome.reason == "proof_failed":
            (target / "plan.json").write_bytes(orjson.dumps(plan))
            (target / "certificate.json").write_bytes(b'{"format":1}')
        if self.warm_start is not None:
            (target / "warm_start").write_bytes(self.warm_start)
        return self.outcome


@dataclass(slots=True, kw_only=True)
class FakeDispatcher:
    """Remembers who was woken up."""

    notified: list[RunId] = field(default_factory=list)

    def notify(self, run_id: RunId) -> None:
        """Note the wake-up."""
        self.notified.append(run_id)


def submitted(  # noqa: PLR0913 - each names one thing that a test may want to differ
    store: Store,
    folder: Path,
    *,
    actor: Actor = LOCAL,
    body: bytes = b'{"format":1}',
    plan_for: str = "2026-02-03",
    deadline_seconds: int = 60,
    likeness: str = "sha-256:" + "b" * 64,
) -> Run:
    """Submit a run as a door would."""
    submit = Submit(store=store, dispatcher=FakeDispatcher())
    left = intake_folder(folder, body=body, plan_for=plan_for, likeness=likeness)
    return submit(left, Options(deadline_seconds=deadline_seconds), actor, WIRE_DIGEST)


def execution(store: Store, scratch: Path, planner: FakePlanner | None = None) -> Execute:
    """Return the use case that executes runs, with a planner that needs no solver."""
    return Execute(
        store=store,
        planner=planner or FakePlanner(),
        scratch=scratch,
        lease_seconds=30,
        pause=lambda _: None,
    )
