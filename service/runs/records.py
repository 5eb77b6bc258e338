"""What the events of a run say: every column of its facts, so that an audit can compare them."""

from collections.abc import Mapping
from enum import StrEnum

from service.runs.events import moment_text
from service.runs.run import Claim, Ending, Submission


class EventKind(StrEnum):
    """What can happen in the stream of a run."""

    SUBMITTED = "submitted"
    CLAIMED = "claimed"
    GIVEN_BACK = "given_back"
    FINISHED = "finished"


class GivenBack(StrEnum):
    """Why a run waits again."""

    CRASH = "crash"
    LEASE = "lease"
    RELEASE = "release"
    RESTART = "restart"
    STORE = "store"


COUNTED_AS_CRASH = frozenset({GivenBack.CRASH, GivenBack.LEASE})
"""Only what points at the run itself; a restart of ours or a lost database says nothing of it."""


def submitted_payload(submission: Submission) -> dict[str, object]:
    """Return what the first event of a run says."""
    return {
        "run": submission.id,
        "plan_for": submission.plan_for.isoformat(),
        "number": submission.number,
        "label": submission.label,
        "created_at": moment_text(submission.created_at),
        "deadline_at": moment_text(submission.deadline_at),
        "wire_digest": submission.wire_digest,
        "request_digest": submission.request_digest,
        "network_digest": submission.network_digest,
        "options_digest": submission.options_digest,
        "normal_digest": submission.normal_digest,
        "intake_digest": submission.intake_digest,
        "counts": dict(submission.counts),
    }


def claimed_payload(claim: Claim, *, crashes: int) -> dict[str, object]:
    """Return what a claim says; the token is a secret of its holder and stays out."""
    return {"attempt": claim.attempt, "crashes": crashes}


def given_back_payload(claim: Claim, why: GivenBack, *, crashes: int) -> dict[str, object]:
    """Return what it says that a run waits again."""
    return {"attempt": claim.attempt, "because": why.value, "crashes": crashes}


def finished_payload(ending: Ending, *, crashes: int) -> dict[str, object]:
    """Return what the last event of a run says."""
    return {
        "state": ending.state.value,
        "reason": None if ending.reason is None else ending.reason.value,
        "detail": ending.detail,
        "attempt": ending.attempt,
        "crashes": crashes,
        "started_at": None if ending.started_at is None else moment_text(ending.started_at),
        "finished_at": moment_text(ending.finished_at),
        "plan_digest": ending.plan_digest,
        "certificate_digest": ending.certificate_digest,
        "seconds": dict(ending.seconds),
    }


def seconds_texts(seconds: Mapping[str, float]) -> dict[str, str]:
    """Return durations as text: canonical JSON has no fractions, and microseconds are enough."""
    return {phase: f"{value:.6f}" for phase, value in sorted(seconds.items())}
