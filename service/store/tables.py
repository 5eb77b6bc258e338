"""The tables. All but two hold facts, which are written once and never changed or removed.

``run_dispatch`` says where a run stands right now; ``warm_start`` is a cache, which may be emptied
at any moment. Every key begins with the tenant.
No CHECK lists values that a later release may add to: SQLite could only widen it by rebuilding the
table, and a fact table is never rebuilt.
"""

from datetime import date, datetime
from typing import Any, ClassVar, Final

from sqlalchemy import (
    BigInteger,
    CheckConstraint,
    Date,
    ForeignKeyConstraint,
    Index,
    Integer,
    LargeBinary,
    MetaData,
    PrimaryKeyConstraint,
    UniqueConstraint,
)
from sqlalchemy.orm import DeclarativeBase, Mapped, mapped_column

from service.store.column_types import Moment, PlainText

DIGEST_CHARACTERS: Final = 72
MOMENT_CHARACTERS: Final = 27
SALT_BYTES: Final = 16


class Base(DeclarativeBase):
    """What every table shares: names of constraints, and column types by Python type."""

    metadata = MetaData(
        naming_convention={
            "pk": "pk_%(table_name)s",
            "uq": "uq_%(table_name)s_%(column_0_N_name)s",
            "ck": "ck_%(table_name)s_%(constraint_name)s",
            "fk": "fk_%(table_name)s_%(referred_table_name)s",
            "ix": "ix_%(table_name)s_%(column_0_N_name)s",
        },
    )
    type_annotation_map: ClassVar[dict[Any, Any]] = {
        str: PlainText,
        int: Integer,
        bytes: LargeBinary,
        datetime: Moment,
        date: Date,
    }


def _digest(column: str, *, nullable: bool = False) -> CheckConstraint:
    form = f"{column} LIKE 'sha-256:%' AND length({column}) = {DIGEST_CHARACTERS}"
    return CheckConstraint(f"{column} IS NULL OR {form}" if nullable else form, name=column)


def _moment(column: str) -> CheckConstraint:
    return CheckConstraint(f"length({column}) = {MOMENT_CHARACTERS}", name=column)


class BlobRow(Base):
    """One part of a blob: 4 MiB of it, compressed. The digest is that of the unpacked whole."""

    __tablename__ = "blob"
    __table_args__ = (
        PrimaryKeyConstraint("tenant", "digest", "part"),
        CheckConstraint("tenant <> ''", name="tenant"),
        CheckConstraint("part >= 0 AND part < parts", name="part"),
        CheckConstraint("unpacked_bytes >= 0", name="unpacked_bytes"),
        _digest("digest"),
    )

    tenant: Mapped[str]
    digest: Mapped[str]
    part: Mapped[int]
    parts: Mapped[int]
    unpacked_bytes: Mapped[int] = mapped_column(BigInteger)
    packed: Mapped[bytes] = mapped_column("bytes", LargeBinary)


class RunRow(Base):
    """What was submitted."""

    __tablename__ = "run"
    __table_args__ = (
        PrimaryKeyConstraint("tenant", "id"),
        # A wake-up names a run by its id alone.
        UniqueConstraint("id"),
        UniqueConstraint("tenant", "plan_for", "number"),
        CheckConstraint("tenant <> '' AND submitted_by <> '' AND authentication <> ''", name="who"),
        CheckConstraint("number >= 1", name="number"),
        CheckConstraint("deadline_at > created_at", name="deadline"),
        _moment("created_at"),
        _moment("deadline_at"),
        _digest("wire_digest"),
        _digest("request_digest"),
        _digest("network_digest"),
        _digest("options_digest"),
        _digest("normal_digest"),
        _digest("intake_digest"),
    )

    tenant: Mapped[str]
    id: Mapped[str]
    plan_for: Mapped[date]
    number: Mapped[int]
    label: Mapped[str | None]
    created_at: Mapped[datetime]
    deadline_at: Mapped[datetime]
    wire_digest: Mapped[str]
    request_digest: Mapped[str]
    network_digest: Mapped[str]
    options_digest: Mapped[str]
    normal_digest: Mapped[str]
    intake_digest: Mapped[str]
    counts: Mapped[str]
    submitted_by: Mapped[str]
    authentication: Mapped[str]


class RunEndingRow(Base):
    """How a run ended; its key lets it end only once."""

    __tablename__ = "run_ending"
    __table_args__ = (
        PrimaryKeyConstraint("tenant", "run"),
        ForeignKeyConstraint(["tenant", "run"], ["run.tenant", "run.id"]),
        CheckConstraint("state NOT IN ('waiting', 'running')", name="state"),
        CheckConstraint("(state = 'failed') = (reason IS NOT NULL)", name="reason"),
        CheckConstraint(
            "state NOT IN ('planned', 'no_plan')"
            " OR (plan_digest IS NOT NULL AND certificate_digest IS NOT NULL)",
            name="artefacts",
        ),
        CheckConstraint("attempt >= 0", name="attempt"),
        _moment("finished_at"),
        _digest("plan_digest", nullable=True),
        _digest("certificate_digest", nullable=True),
    )

    tenant: Mapped[str]
    run: Mapped[str]
    state: Mapped[str]
    reason: Mapped[str | None]
    detail: Mapped[str | None]
    attempt: Mapped[int]
    started_at: Mapped[datetime | None]
    finished_at: Mapped[datetime]
    plan_digest: Mapped[str | None]
    certificate_digest: Mapped[str | None]
    seconds: Mapped[str]


class RunDispatchRow(Base):
    """Where a run stands: the one row that changes.

    ``attempt`` counts claims and only fences; ``crashes`` counts children that died by themselves
    and leases that ran out. ``token`` names the holder, ``finished_token`` the one that finished,
    so that a finish whose answer was lost can be repeated. ``progress`` is JSON; ``likeness`` and
    ``memory_bytes`` were found out when the run was submitted and serve only to plan it.
    """

    __tablename__ = "run_dispatch"
    __table_args__ = (
        PrimaryKeyConstraint("tenant", "run"),
        ForeignKeyConstraint(["tenant", "run"], ["run.tenant", "run.id"]),
        UniqueConstraint("run"),
        UniqueConstraint("token"),
        CheckConstraint("attempt >= 0", name="attempt"),
        CheckConstraint("crashes >= 0", name="crashes"),
        CheckConstraint("(state = 'running') = (token IS NOT NULL)", name="token"),
        CheckConstraint("(state = 'running') = (lease_until IS NOT NULL)", name="lease"),
        CheckConstraint(
            "finished_token IS NULL OR state NOT IN ('waiting', 'running')",
            name="finished_token",
        ),
        # The queue: what waits, in the order of submission (ids sort by time).
        Index(None, "state", "run"),
    )

    tenant: Mapped[str]
    run: Mapped[str]
    state: Mapped[str]
    attempt: Mapped[int]
    crashes: Mapped[int]
    token: Mapped[str | None]
    finished_token: Mapped[str | None]
    lease_until: Mapped[datetime | None]
    deadline_at: Mapped[datetime]
    started_at: Mapped[datetime | None]
    progress: Mapped[str | None]
    likeness: Mapped[str | None]
    memory_bytes: Mapped[int | None] = mapped_column(BigInteger)


class WarmStartRow(Base):
    """What a planned run leaves for the next one like it to start from: a cache, never a fact."""

    __tablename__ = "warm_start"
    __table_args__ = (
        PrimaryKeyConstraint("tenant", "run"),
        ForeignKeyConstraint(["tenant", "run"], ["run.tenant", "run.id"]),
        Index(None, "tenant", "network_digest", "run"),
        Index(None, "tenant", "likeness", "run"),
    )

    tenant: Mapped[str]
    run: Mapped[str]
    network_digest: Mapped[str]
    likeness: Mapped[str | None]
    digest: Mapped[str]
    packed_bytes: Mapped[int]
    packed: Mapped[bytes] = mapped_column("bytes", LargeBinary)


class EventRow(Base):
    """One link of a stream's chain."""

    __tablename__ = "event"
    __table_args__ = (
        PrimaryKeyConstraint("tenant", "stream", "seq"),
        CheckConstraint(
            "tenant <> '' AND stream <> '' AND kind <> '' AND actor <> '' AND authentication <> ''",
            name="who",
        ),
        CheckConstraint("seq >= 1", name="seq"),
        CheckConstraint("format >= 1", name="format"),
        _moment("recorded_at"),
        _digest("payload_digest", nullable=True),
        _digest("previous"),
        _digest("hash"),
    )

    tenant: Mapped[str]
    stream: Mapped[str]
    seq: Mapped[int]
    format: Mapped[int]
    recorded_at: Mapped[str]
    kind: Mapped[str]
    actor: Mapped[str]
    authentication: Mapped[str]
    payload_digest: Mapped[str | None]
    previous: Mapped[str]
    hash: Mapped[str]


class EventPayloadRow(Base):
    """What an event says, beside its chain, so that it can be erased without breaking that."""

    __tablename__ = "event_payload"
    __table_args__ = (
        PrimaryKeyConstraint("tenant", "stream", "seq"),
        ForeignKeyConstraint(
            ["tenant", "stream", "seq"],
            ["event.tenant", "event.stream", "event.seq"],
        ),
        CheckConstraint(f"length(salt) = {SALT_BYTES}", name="salt"),
    )

    tenant: Mapped[str]
    stream: Mapped[str]
    seq: Mapped[int]
    salt: Mapped[bytes]
    payload: Mapped[str]


class PlanLineRow(Base):
    """A row of a plan, to search by; the plan blob is the record."""

    __tablename__ = "plan_line"
    __table_args__ = (
        PrimaryKeyConstraint("tenant", "run", "position"),
        ForeignKeyConstraint(["tenant", "run"], ["run.tenant", "run.id"]),
        CheckConstraint("position >= 0", name="position"),
        # The key is all that is ever looked up by rowid, and there may be millions.
        {"sqlite_with_rowid": False},
    )

    tenant: Mapped[str]
    run: Mapped[str]
    position: Mapped[int]
    lane: Mapped[str | None]
    origin: Mapped[str]
    destination: Mapped[str]
    item: Mapped[str]
    quantity: Mapped[str]


class OrderLineRow(Base):
    """An order line as a plan serves it, to search by; the plan blob is the record."""

    __tablename__ = "order_line"
    __table_args__ = (
        PrimaryKeyConstraint("tenant", "run", "position"),
        ForeignKeyConstraint(["tenant", "run"], ["run.tenant", "run.id"]),
        CheckConstraint("position >= 0", name="position"),
        {"sqlite_with_rowid": False},
    )

    tenant: Mapped[str]
    run: Mapped[str]
    position: Mapped[int]
    reference: Mapped[str]
    order: Mapped[str | None]
    site: Mapped[str]
    item: Mapped[str]
    quantity: Mapped[str]
    served: Mapped[str]
    short: Mapped[str]


DISPATCH_TABLE: Final = RunDispatchRow.__tablename__
CACHE_TABLE: Final = WarmStartRow.__tablename__
FACT_TABLES: Final = tuple(sorted(set(Base.metadata.tables) - {DISPATCH_TABLE, CACHE_TABLE}))
