"""The work behind the commands, as a fake that answers as it is told."""

from collections.abc import Callable, Mapping
from contextlib import AbstractContextManager
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, Literal

import orjson

from service.doors.command_line.backing import Audit, Backing, NotReadyError, OnProgress
from service.network.faults import Fault, Status
from service.network.intake import IntakeReport
from service.network.options import Options
from service.planning.outcome import FailureReason, Outcome
from service.runs.use_cases import Application

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
            reason=FailureReason.NUMBERS_TOO_LARGE if failed else None,
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
