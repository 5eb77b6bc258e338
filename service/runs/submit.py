"""Submitting: what intake found good becomes a waiting run; what is returned is on disk."""

import zipfile
from dataclasses import dataclass
from datetime import date, timedelta
from pathlib import Path
from typing import Any

import orjson

from service.network.canonical import HEAD_ENTRY, canonical_json, digest
from service.network.intake_files import INTAKE_FILE, NETWORK_FILE, RECEIVED_FILE
from service.network.options import Options
from service.planning.memory import estimated_peak_bytes
from service.runs.events import run_stream
from service.runs.faults import PlanTooLarge
from service.runs.identity import new_run_id
from service.runs.ports import Dispatcher, Store
from service.runs.records import EventKind, submitted_payload
from service.runs.run import Actor, Needs, Run, Submission


class IntakeBroken(Exception):  # noqa: N818 - named for the fact, like every error of this house
    """What intake left does not fit together; our mistake, never a client's."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Submit:
    """Stores a checked network as a waiting run."""

    store: Store
    dispatcher: Dispatcher
    plan_memory_bytes_max: int | None = None

    def __call__(self, folder: Path, options: Options, actor: Actor, wire_digest: str) -> Run:
        """Store what intake left in ``folder``; what is returned is on disk.

        Raises ``PlanTooLarge`` when planning it cannot fit into the memory that it may use.

        The planning itself happens elsewhere (``runs/execute.py``): no transaction is ever open
        while a solver works. Large blobs are written before the transaction that names them.
        """
        tenant = actor.tenant
        intake_bytes = (folder / INTAKE_FILE).read_bytes()
        summary: dict[str, Any] = orjson.loads(intake_bytes)
        needs = Needs(
            likeness=summary["likeness"], memory_bytes=estimated_peak_bytes(summary["workload"])
        )
        refuse_too_large(needs, self.plan_memory_bytes_max)
        received = self.store.stage_file(tenant, folder / RECEIVED_FILE)
        normal = self.store.stage_file(tenant, folder / NETWORK_FILE)
        intake = self.store.stage_bytes(tenant, intake_bytes)
        option_bytes = self.store.stage_bytes(tenant, canonical_json(options.to_document()))
        # Digests that a child reported are proved here once more: they are written for good.
        if received.digest != summary["request_digest"]:
            raise IntakeBroken("the bytes received are not those that were checked")
        if _network_digest(folder / NETWORK_FILE) != summary["network_digest"]:
            raise IntakeBroken("the normal form is not the one that was reported")
        plan_for = options.plan_for or date.fromisoformat(summary["plan_for"])

        with self.store.transaction() as transaction:
            now = transaction.now
            submission = Submission(
                id=new_run_id(now),
                tenant=tenant,
                plan_for=plan_for,
                number=transaction.next_number(tenant, plan_for),
                label=options.label,
                created_at=now,
                deadline_at=now + timedelta(seconds=options.deadline_seconds),
                wire_digest=wire_digest,
                request_digest=received.digest,
                network_digest=summary["network_digest"],
                options_digest=option_bytes.digest,
                normal_digest=normal.digest,
                intake_digest=intake.digest,
                counts=summary["counts"],
                submitted_by=actor.name,
                authentication=actor.authentication,
            )
            for staged in (received, normal, intake, option_bytes):
                transaction.add_blob(staged)
            transaction.add_run(submission, needs)
            stream = run_stream(submission.id)
            transaction.append(stream, EventKind.SUBMITTED, actor, submitted_payload(submission))
            run = transaction.run(submission.id, tenant)
        self.dispatcher.notify(run.id)  # only a wake-up: losing it must not lose the run
        return run


def refuse_too_large(needs: Needs, allowed_bytes: int | None) -> None:
    """Raise ``PlanTooLarge`` when ``needs`` are above what planning may use; None is no bound."""
    if allowed_bytes is not None and (needs.memory_bytes or 0) > allowed_bytes:
        raise PlanTooLarge(
            estimated_bytes=needs.memory_bytes or 0,
            allowed_bytes=allowed_bytes,
        )


def _network_digest(path: Path) -> str:
    with zipfile.ZipFile(path) as archive:
        return digest(archive.read(HEAD_ENTRY))
