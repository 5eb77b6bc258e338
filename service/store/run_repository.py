"""What runs are: inserted once, read with the dispatch row that says where they stand."""

from datetime import date

import orjson
from sqlalchemy import func, select
from sqlalchemy.orm import Session

from service.planning.outcome import FailureReason
from service.runs.faults import RunUnknown
from service.runs.run import (
    CHECKED,
    STORED,
    Ending,
    Needs,
    Progress,
    Run,
    RunId,
    RunState,
    Submission,
)
from service.store.tables import RunDispatchRow, RunEndingRow, RunRow


class SqlRunRepository:
    """Append-only store of what was submitted and how it ended."""

    def __init__(self, session: Session) -> None:
        """Work inside the caller's transaction; never commit here."""
        self._session = session

    def add(self, submission: Submission, needs: Needs) -> None:
        """Insert a run and its dispatch row; flush so that a duplicate fails here."""
        self._session.add(
            RunRow(
                tenant=submission.tenant,
                id=submission.id,
                plan_for=submission.plan_for,
                number=submission.number,
                label=submission.label,
                created_at=submission.created_at,
                deadline_at=submission.deadline_at,
                wire_digest=submission.wire_digest,
                request_digest=submission.request_digest,
                network_digest=submission.network_digest,
                options_digest=submission.options_digest,
                normal_digest=submission.normal_digest,
                intake_digest=submission.intake_digest,
                counts=orjson.dumps(dict(submission.counts)).decode(),
                submitted_by=submission.submitted_by,
                authentication=submission.authentication,
            ),
        )
        self._session.flush()
        self._session.add(
            RunDispatchRow(
                tenant=submission.tenant,
                run=submission.id,
                state=RunState.WAITING,
                attempt=0,
                crashes=0,
                deadline_at=submission.deadline_at,
                likeness=needs.likeness,
                memory_bytes=needs.memory_bytes,
            ),
        )
        self._session.flush()

    def highest_number(self, tenant: str, plan_for: date) -> int:
        """Return the highest run number of a date, 0 when there is none."""
        statement = select(func.max(RunRow.number)).where(
            RunRow.tenant == tenant,
            RunRow.plan_for == plan_for,
        )
        return self._session.scalar(statement) or 0

    def add_ending(self, run_id: RunId, tenant: str, ending: Ending) -> None:
        """Insert how a run ended; flush so that a second ending fails here."""
        self._session.add(
            RunEndingRow(
                tenant=tenant,
                run=run_id,
                state=ending.state,
                reason=ending.reason,
                detail=ending.detail,
                attempt=ending.attempt,
                started_at=ending.started_at,
                finished_at=ending.finished_at,
                plan_digest=ending.plan_digest,
                certificate_digest=ending.certificate_digest,
                seconds=orjson.dumps(dict(ending.seconds)).decode(),
            ),
        )
        self._session.flush()

    def get(self, run_id: RunId, tenant: str) -> Run:
        """Return the run as it stands, or raise ``RunUnknown``."""
        statement = (
            select(RunRow, RunDispatchRow, RunEndingRow)
            .join(
                RunDispatchRow,
                (RunDispatchRow.tenant == RunRow.tenant) & (RunDispatchRow.run == RunRow.id),
            )
            .outerjoin(
                RunEndingRow,
                (RunEndingRow.tenant == RunRow.tenant) & (RunEndingRow.run == RunRow.id),
            )
            .where(RunRow.tenant == tenant, RunRow.id == run_id)
            # The dispatch row was perhaps changed by an UPDATE of this same transaction.
            .execution_options(populate_existing=True)
        )
        row = self._session.execute(statement).one_or_none()
        if row is None:
            raise RunUnknown(run_id)
        return _run(row[0], row[1], row[2])

    def submission(self, run_id: RunId, tenant: str) -> Submission:
        """Return what was submitted, or raise ``RunUnknown``."""
        row = self._session.get(RunRow, (tenant, run_id))
        if row is None:
            raise RunUnknown(run_id)
        return submission_of(row)


def submission_of(row: RunRow) -> Submission:
    """Return the row as the use cases know it."""
    return Submission(
        id=RunId(row.id),
        tenant=row.tenant,
        plan_for=row.plan_for,
        number=row.number,
        label=row.label,
        created_at=row.created_at,
        deadline_at=row.deadline_at,
        wire_digest=row.wire_digest,
        request_digest=row.request_digest,
        network_digest=row.network_digest,
        options_digest=row.options_digest,
        normal_digest=row.normal_digest,
        intake_digest=row.intake_digest,
        counts=orjson.loads(row.counts),
        submitted_by=row.submitted_by,
        authentication=row.authentication,
    )


def ending_of(row: RunEndingRow) -> Ending:
    """Return the row as the use cases know it."""
    return Ending(
        state=RunState(row.state),
        reason=None if row.reason is None else FailureReason(row.reason),
        detail=row.detail,
        attempt=row.attempt,
        started_at=row.started_at,
        finished_at=row.finished_at,
        plan_digest=row.plan_digest,
        certificate_digest=row.certificate_digest,
        seconds=orjson.loads(row.seconds),
    )


def _run(submitted: RunRow, dispatch: RunDispatchRow, ended: RunEndingRow | None) -> Run:
    ending = None if ended is None else ending_of(ended)
    return Run(
        id=RunId(submitted.id),
        tenant=submitted.tenant,
        number=f"{submitted.plan_for.isoformat()}/{submitted.number}",
        state=RunState(dispatch.state),
        reason=None if ending is None else ending.reason,
        detail=None if ending is None else ending.detail,
        label=submitted.label,
        plan_for=submitted.plan_for,
        created_at=submitted.created_at,
        deadline_at=submitted.deadline_at,
        started_at=dispatch.started_at,
        finished_at=None if ending is None else ending.finished_at,
        attempt=dispatch.attempt,
        crashes=dispatch.crashes,
        request_digest=submitted.request_digest,
        network_digest=submitted.network_digest,
        options_digest=submitted.options_digest,
        plan_digest=None if ending is None else ending.plan_digest,
        certificate_digest=None if ending is None else ending.certificate_digest,
        counts=orjson.loads(submitted.counts),
        submitted_by=submitted.submitted_by,
        progress=_progress(submitted, dispatch),
    )


def _progress(submitted: RunRow, dispatch: RunDispatchRow) -> Progress:
    """Return how far the run is; nothing was told of one that waits, or that is an old one."""
    if dispatch.progress is not None:
        return progress_of(dispatch.progress)
    planned = dispatch.state in {RunState.PLANNED, RunState.NO_PLAN}
    return Progress(
        phase=STORED if planned else CHECKED,
        counts=orjson.loads(submitted.counts),
        seconds=0.0,
    )


def progress_of(text: str) -> Progress:
    """Read what ``progress_text`` wrote."""
    document = orjson.loads(text)
    return Progress(phase=document["phase"], counts=document["counts"], seconds=document["seconds"])


def progress_text(progress: Progress) -> str:
    """Return progress as it is kept in the dispatch row."""
    document = {
        "phase": progress.phase,
        "counts": dict(progress.counts),
        "seconds": progress.seconds,
    }
    return orjson.dumps(document).decode()
