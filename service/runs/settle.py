"""The ways in which a claim is settled, each with its event in the same transaction."""

from datetime import datetime

from service.planning.outcome import FailureReason
from service.runs.events import run_stream
from service.runs.ports import Store, Transaction
from service.runs.records import (
    COUNTED_AS_CRASH,
    EventKind,
    GivenBack,
    finished_payload,
    given_back_payload,
)
from service.runs.run import (
    Claim,
    Ending,
    Finish,
    Progress,
    RunState,
    engine_of,
)


def end(
    transaction: Transaction,
    claim: Claim,
    ending: Ending,
    *,
    crashed: bool = False,
    progress: Progress | None = None,
) -> Finish:
    """Make the run final if ``claim`` holds it, and say so in its history."""
    finish = transaction.finish(claim, ending, crashed=crashed, progress=progress)
    if finish is Finish.STORED:
        crashes = transaction.run(claim.run_id, claim.tenant).crashes
        transaction.append(
            run_stream(claim.run_id),
            EventKind.FINISHED,
            engine_of(claim.tenant),
            finished_payload(ending, crashes=crashes),
        )
    return finish


def give_back(store: Store, claim: Claim, why: GivenBack) -> RunState | None:
    """Let the run wait again, in a transaction of its own; None when the claim is gone."""
    with store.transaction() as transaction:
        return put_back(transaction, claim, why)


def put_back(transaction: Transaction, claim: Claim, why: GivenBack) -> RunState | None:
    """Let the run wait again, and say why in its history; None when the claim is gone."""
    crashes = transaction.give_back(claim, crashed=why in COUNTED_AS_CRASH)
    if crashes is None:
        return None
    transaction.append(
        run_stream(claim.run_id),
        EventKind.GIVEN_BACK,
        engine_of(claim.tenant),
        given_back_payload(claim, why, crashes=crashes),
    )
    return RunState.WAITING


def count_crash(
    store: Store,
    claim: Claim,
    why: GivenBack,
    *,
    detail: str,
    crashes_max: int,
) -> RunState | None:
    """Do ``settle_crash`` in a transaction of its own."""
    with store.transaction() as transaction:
        return settle_crash(transaction, claim, why, detail=detail, crashes_max=crashes_max)


def settle_crash(
    transaction: Transaction,
    claim: Claim,
    why: GivenBack,
    *,
    detail: str,
    crashes_max: int,
) -> RunState | None:
    """Count a crash: the run waits again, or has failed with the last one that it may have.

    None when the claim is gone, and then nothing is counted.
    """
    run = transaction.run(claim.run_id, claim.tenant)
    if run.crashes + 1 < crashes_max:
        return put_back(transaction, claim, why)
    ending = failure(
        FailureReason.SOLVER_CRASHED,
        f"{crashes_max} planning processes died over this run. The last: {detail}",
        attempt=claim.attempt,
        started_at=run.started_at,
        finished_at=transaction.now,
    )
    finish = end(transaction, claim, ending, crashed=True)
    return None if finish is Finish.FENCED else RunState.FAILED


def failure(
    reason: FailureReason,
    detail: str,
    *,
    attempt: int,
    started_at: datetime | None,
    finished_at: datetime,
) -> Ending:
    """Return the ending of a run that left nothing behind."""
    return Ending(
        state=RunState.FAILED,
        reason=reason,
        detail=detail,
        attempt=attempt,
        started_at=started_at,
        finished_at=finished_at,
        plan_digest=None,
        certificate_digest=None,
        seconds={},
    )
