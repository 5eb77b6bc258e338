"""What a run is: its state, what was submitted, how it ended, and who holds it meanwhile."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import date, datetime
from enum import StrEnum
from typing import Final, NewType

from service.planning.outcome import FailureReason

RunId = NewType("RunId", str)
Token = NewType("Token", str)


class RunState(StrEnum):
    """Where a run stands; the last four are final."""

    WAITING = "waiting"
    RUNNING = "running"
    PLANNED = "planned"
    NO_PLAN = "no_plan"
    FAILED = "failed"
    CANCELLED = "cancelled"


@dataclass(frozen=True, slots=True, kw_only=True)
class Actor:
    """Who does something: ``authentication`` says how the name was established."""

    tenant: str
    name: str
    authentication: str


LOCAL = Actor(tenant="local", name="local", authentication="none")
"""Whoever reaches a service without keys: it listens on loopback only."""


def engine_of(tenant: str) -> Actor:
    """Return the actor under which the engine itself writes into the history of ``tenant``."""
    return Actor(tenant=tenant, name="engine", authentication="internal")


@dataclass(frozen=True, slots=True, kw_only=True)
class Progress:
    """How far a run has come: ``phase`` is the last thing that was done.

    First it is ``checked``, then what planning tells, in the end ``stored``. ``counts`` say how
    many of what were met so far; ``seconds`` how long planning had taken by then.
    """

    phase: str
    counts: Mapping[str, int]
    seconds: float


CHECKED: Final = "checked"
STORED: Final = "stored"


@dataclass(frozen=True, slots=True, kw_only=True)
class Run:
    """One request to plan a network, as it stands now.

    ``number`` is ``DATE/N``; ``plan_digest`` and ``certificate_digest`` are absent until the run is
    ``planned`` or ``no_plan`` (or ``failed`` with ``proof_failed``, which keeps both artefacts).
    ``attempt`` counts claims, ``crashes`` the children that died by themselves.
    """

    id: RunId
    tenant: str
    number: str
    state: RunState
    reason: FailureReason | None
    detail: str | None
    label: str | None
    plan_for: date
    created_at: datetime
    deadline_at: datetime
    started_at: datetime | None
    finished_at: datetime | None
    attempt: int
    crashes: int
    request_digest: str
    network_digest: str
    options_digest: str
    plan_digest: str | None
    certificate_digest: str | None
    counts: Mapping[str, int]
    submitted_by: str
    progress: Progress


@dataclass(frozen=True, slots=True, kw_only=True)
class Needs:
    """What planning a run takes, as far as its input tells; neither changes any result.

    Runs of equal ``likeness`` have the same warehouses, items and currency: one may start from
    what another found out. ``memory_bytes`` is an estimate of the peak that planning reaches.
    """

    likeness: str | None
    memory_bytes: int | None


@dataclass(frozen=True, slots=True, kw_only=True)
class Submission:
    """What a run is from its first moment on; nothing of it ever changes.

    Four digests are keys of blobs: ``request_digest`` (the body as received, unpacked),
    ``normal_digest`` (the file ``network.zip``), ``intake_digest`` (``intake.json``) and
    ``options_digest``. ``wire_digest`` is taken over the bytes that came over the wire,
    ``network_digest`` over the meaning.
    """

    id: RunId
    tenant: str
    plan_for: date
    number: int
    label: str | None
    created_at: datetime
    deadline_at: datetime
    wire_digest: str
    request_digest: str
    network_digest: str
    options_digest: str
    normal_digest: str
    intake_digest: str
    counts: Mapping[str, int]
    submitted_by: str
    authentication: str


@dataclass(frozen=True, slots=True, kw_only=True)
class Ending:
    """How a run ended, once and for all."""

    state: RunState
    reason: FailureReason | None
    detail: str | None
    attempt: int
    started_at: datetime | None
    finished_at: datetime
    plan_digest: str | None
    certificate_digest: str | None
    seconds: Mapping[str, str]


@dataclass(frozen=True, slots=True, kw_only=True)
class Claim:
    """The right to plan a run once; whoever holds another token writes nothing.

    ``seconds_left`` until the deadline, by the store's clock: count it down with a monotonic clock
    of your own and never compare ``deadline_at`` with one.
    """

    run_id: RunId
    tenant: str
    token: Token
    attempt: int
    crashes: int
    deadline_at: datetime
    seconds_left: float
    needs: Needs


class Finish(StrEnum):
    """What became of the attempt to store an outcome."""

    STORED = "stored"
    ALREADY_STORED = "already_stored"
    FENCED = "fenced"


@dataclass(frozen=True, slots=True, kw_only=True)
class Staged:
    """A blob on its way in: its digest, and what has still to be written of it.

    Large blobs are written part by part before the transaction that refers to them; nothing refers
    to them until then. Small ones travel in ``part`` and are written within.
    """

    tenant: str
    digest: str
    unpacked_bytes: int
    part: bytes | None


@dataclass(frozen=True, slots=True, kw_only=True)
class IndexRows:
    """Rows by which plans are searched; the plan blob is the record, these can be rebuilt from it.

    ``plan_lines``: (position, lane, origin, destination, item, quantity); ``order_lines``:
    (position, reference, order, site, item, quantity, served, short).
    """

    plan_lines: Sequence[Mapping[str, object]]
    order_lines: Sequence[Mapping[str, object]]


@dataclass(frozen=True, slots=True, kw_only=True)
class StoredEvent:
    """An event as it is stored, with its payload and the salt of its digest if not erased."""

    tenant: str
    stream: str
    seq: int
    format: int
    recorded_at: str
    kind: str
    actor: str
    authentication: str
    payload_digest: str | None
    previous: str
    hash: str
    payload: Mapping[str, object] | None
    salt: bytes | None
