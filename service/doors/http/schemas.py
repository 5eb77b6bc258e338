"""What this door says about runs, as models: the source of the interface description.

Networks, plans and certificates have no model here: they are stored bytes, and their schemas and
examples are in ``openapi/``.
"""

from datetime import date, datetime
from typing import Annotated, Final

from pydantic import BaseModel, ConfigDict, Field

from service.planning.outcome import FailureReason
from service.runs.run import Run, RunState

RUN_ID_PATTERN: Final = "^run_[0-9a-v]{26}$"
DIGEST_PATTERN: Final = "^sha-256:[0-9a-f]{64}$"

PLANNED_STATES: Final = frozenset({RunState.PLANNED, RunState.NO_PLAN})
"""In these a run has a proved plan, or a proof that there is none."""

_WIRE = ConfigDict(extra="forbid", frozen=True)

Digest = Annotated[str, Field(pattern=DIGEST_PATTERN)]
Moment = Annotated[datetime, Field(description="RFC 3339, UTC.")]


class CountsOut(BaseModel):
    """How many rows the network has."""

    model_config = _WIRE

    items: int = Field(ge=0)
    sites: int = Field(ge=0)
    supply_rows: int = Field(ge=0)
    demand_rows: int = Field(ge=0, description="Order lines that are planned.")
    lanes: int = Field(ge=0)


class ProgressOut(BaseModel):
    """How far a run has come."""

    model_config = _WIRE

    phase: str = Field(
        description="The last thing that was done: checked, then read, compiled, round (once for "
        "each round of pricing all lanes), solved, written, proved, stored. Clients must expect "
        "further phases.",
        examples=["round"],
    )
    counts: dict[str, int] = Field(
        description="How many of what were met so far, such as lanes, order_lines, items, round. "
        "Clients must expect further names."
    )
    seconds: float = Field(ge=0, description="How long planning had taken by then.")


class LinksOut(BaseModel):
    """Paths of what exists of the run in its present state."""

    model_config = _WIRE

    self: str
    network: str
    history: str
    plan: str | None = Field(description="Absent until the run is planned or has no plan.")
    certificate: str | None = Field(description="Absent until the run is planned or has no plan.")
    evidence: str | None = Field(description="Absent until the run is planned or has no plan.")


class RunOut(BaseModel):
    """One request to plan a network, as it stands now."""

    model_config = _WIRE

    id: str = Field(pattern=RUN_ID_PATTERN)
    number: str = Field(description="DATE/N: the N-th run for that date, without gaps.")
    state: RunState = Field(
        description="waiting and running are followed by one of the others, which are final. "
        "planned: there is a proved plan. no_plan: it is proved that there can be none. failed: "
        "see reason. Clients must expect further states."
    )
    reason: FailureReason | None = Field(description="Why the run failed.")
    detail: str | None = Field(description="The reason in a sentence, for people.")
    label: str | None
    plan_for: date
    created_at: Moment
    deadline_at: Moment
    started_at: Moment | None = Field(description="When planning began, the last time it did.")
    finished_at: Moment | None
    attempt: int = Field(ge=0, description="How often planning was begun.")
    crashes: int = Field(ge=0, description="How often a planning process died by itself.")
    request_digest: Digest = Field(description="SHA-256 of the body as received, unpacked.")
    network_digest: Digest = Field(description="Of the meaning of the network, whatever its form.")
    options_digest: Digest
    plan_digest: Digest | None
    certificate_digest: Digest | None
    counts: CountsOut
    progress: ProgressOut
    submitted_by: str
    links: LinksOut

    @staticmethod
    def from_domain(run: Run) -> "RunOut":
        """Return ``run`` as it is answered."""
        here = f"/v1/runs/{run.id}"
        planned = run.state in PLANNED_STATES

        def if_planned(artefact: str) -> str | None:
            return f"{here}/{artefact}" if planned else None

        return RunOut(
            id=run.id,
            number=run.number,
            state=run.state,
            reason=run.reason,
            detail=run.detail,
            label=run.label,
            plan_for=run.plan_for,
            created_at=run.created_at,
            deadline_at=run.deadline_at,
            started_at=run.started_at,
            finished_at=run.finished_at,
            attempt=run.attempt,
            crashes=run.crashes,
            request_digest=run.request_digest,
            network_digest=run.network_digest,
            options_digest=run.options_digest,
            plan_digest=run.plan_digest,
            certificate_digest=run.certificate_digest,
            counts=CountsOut.model_validate(dict(run.counts)),
            progress=ProgressOut(
                phase=run.progress.phase,
                counts=dict(run.progress.counts),
                seconds=run.progress.seconds,
            ),
            submitted_by=run.submitted_by,
            links=LinksOut(
                self=here,
                network=f"{here}/network",
                history=f"{here}/history",
                plan=if_planned("plan"),
                certificate=if_planned("certificate"),
                evidence=if_planned("evidence"),
            ),
        )


class EventOut(BaseModel):
    """One entry of a history; ``hash`` covers the members before it (RFC 8785, SHA-256)."""

    model_config = _WIRE

    tenant: str
    stream: str
    seq: int = Field(ge=1, description="Without gaps within the stream.")
    format: int
    recorded_at: str = Field(description="RFC 3339, UTC, six decimals.")
    kind: str
    actor: str
    authentication: str
    payload_digest: Digest | None
    previous: Digest = Field(description="The hash of the event before; of the first, zeros.")
    hash: Digest


class HistoryEntryOut(BaseModel):
    """An event with its payload and the salt of the payload's digest, unless erased."""

    model_config = _WIRE

    event: EventOut
    payload: dict[str, object] | None
    salt: str | None = Field(description="Hexadecimal.")


class HistoryOut(BaseModel):
    """Who did what to a run, and when."""

    model_config = _WIRE

    run: str = Field(pattern=RUN_ID_PATTERN)
    events: list[HistoryEntryOut]


class AliveOut(BaseModel):
    """The process answers."""

    model_config = _WIRE

    alive: bool


class ReadyOut(BaseModel):
    """Everything that the service needs is there."""

    model_config = _WIRE

    ready: bool


class ErrorOut(BaseModel):
    """One fault of what was sent."""

    model_config = _WIRE

    pointer: str = Field(
        description="Where: a JSON pointer (RFC 6901) into the body as sent, ?name for a query "
        "parameter, or Name: for a header field."
    )
    code: str = Field(description="Stable; Clients must expect further codes.")
    detail: str = Field(description="What is wrong and what to do.")
    value: str | None = Field(description="The offending value, cut at 200 characters.")


class ProblemOut(BaseModel):
    """A problem (RFC 9457)."""

    # Extension members are what RFC 9457 lets problems have.
    model_config = ConfigDict(extra="allow", frozen=True)

    type: str = Field(description="A path of this service; its page explains the kind of problem.")
    title: str
    status: int = Field(ge=400, le=599)
    detail: str
    instance: str = Field(description="The path that was asked for.")
    request_id: str = Field(description="The same as in the header X-Request-ID and in the log.")
    errors: list[ErrorOut] = Field(default=[], description="At most 100 of them.")
    error_count: int = Field(default=0, ge=0, description="How many there are in all.")
