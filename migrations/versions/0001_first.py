# ruff: noqa: INP001 - Alembic finds revisions by their path
"""The first tables: runs, their chains of events, their contents; and the triggers that keep them.

What is written here stays as it is, whatever the models become: a revision is history.
"""

import sqlalchemy as sa
from alembic import op

revision = "0001"
down_revision = None
branch_labels = None
depends_on = None

PLAIN_TEXT = sa.Text().with_variant(sa.Text(collation="C"), "postgresql")

FACTS = (
    "blob",
    "event",
    "event_payload",
    "order_line",
    "plan_line",
    "run",
    "run_ending",
)
DISPATCH = "run_dispatch"

LEGAL_MOVES = (
    "NEW.tenant = OLD.tenant AND NEW.run = OLD.run AND NEW.deadline_at = OLD.deadline_at"
    " AND NEW.attempt >= OLD.attempt AND NEW.crashes >= OLD.crashes"
    " AND OLD.state || '>' || NEW.state IN ('running>cancelled', 'running>failed',"
    " 'running>no_plan', 'running>planned', 'running>running', 'running>waiting',"
    " 'waiting>cancelled', 'waiting>failed', 'waiting>running')"
)


def upgrade() -> None:
    """Create the tables, then the triggers."""
    _create_runs()
    _create_events()
    _create_contents()
    if op.get_bind().dialect.name == "sqlite":
        _create_sqlite_triggers()
    else:
        _create_postgresql_triggers()


def downgrade() -> None:
    """Drop everything, triggers with their tables."""
    for table in ("order_line", "plan_line", "blob", "event_payload", "event"):
        op.drop_table(table)
    for table in (DISPATCH, "run_ending", "run"):
        op.drop_table(table)
    if op.get_bind().dialect.name != "sqlite":
        op.execute("DROP FUNCTION lanewright_dispatch()")
        op.execute("DROP FUNCTION lanewright_refuse()")


def _create_runs() -> None:
    """Create what was submitted, how it ended, and where it stands."""
    op.create_table(
        "run",
        _text("tenant"),
        _text("id"),
        sa.Column("plan_for", sa.Date(), nullable=False),
        sa.Column("number", sa.Integer(), nullable=False),
        _text("label", nullable=True),
        _text("created_at"),
        _text("deadline_at"),
        _text("wire_digest"),
        _text("request_digest"),
        _text("network_digest"),
        _text("options_digest"),
        _text("normal_digest"),
        _text("intake_digest"),
        _text("counts"),
        _text("submitted_by"),
        _text("authentication"),
        _digest("run", "intake_digest"),
        _digest("run", "network_digest"),
        _digest("run", "normal_digest"),
        _digest("run", "options_digest"),
        _digest("run", "request_digest"),
        sa.CheckConstraint(
            "tenant <> '' AND submitted_by <> '' AND authentication <> ''", name=op.f("ck_run_who")
        ),
        _digest("run", "wire_digest"),
        sa.CheckConstraint("deadline_at > created_at", name=op.f("ck_run_deadline")),
        _moment("run", "created_at"),
        _moment("run", "deadline_at"),
        sa.CheckConstraint("number >= 1", name=op.f("ck_run_number")),
        sa.PrimaryKeyConstraint("tenant", "id", name="pk_run"),
        sa.UniqueConstraint("id", name="uq_run_id"),
        sa.UniqueConstraint("tenant", "plan_for", "number", name="uq_run_tenant_plan_for_number"),
    )
    op.create_table(
        "run_ending",
        _text("tenant"),
        _text("run"),
        _text("state"),
        _text("reason", nullable=True),
        _text("detail", nullable=True),
        sa.Column("attempt", sa.Integer(), nullable=False),
        _text("started_at", nullable=True),
        _text("finished_at"),
        _text("plan_digest", nullable=True),
        _text("certificate_digest", nullable=True),
        _text("seconds"),
        sa.CheckConstraint(
            "(state = 'failed') = (reason IS NOT NULL)", name=op.f("ck_run_ending_reason")
        ),
        _digest("run_ending", "certificate_digest", nullable=True),
        _digest("run_ending", "plan_digest", nullable=True),
        sa.CheckConstraint(
            "state NOT IN ('planned', 'no_plan')"
            " OR (plan_digest IS NOT NULL AND certificate_digest IS NOT NULL)",
            name=op.f("ck_run_ending_artefacts"),
        ),
        sa.CheckConstraint("state NOT IN ('waiting', 'running')", name=op.f("ck_run_ending_state")),
        sa.CheckConstraint("attempt >= 0", name=op.f("ck_run_ending_attempt")),
        _moment("run_ending", "finished_at"),
        sa.ForeignKeyConstraint(
            ["tenant", "run"], ["run.tenant", "run.id"], name="fk_run_ending_run"
        ),
        sa.PrimaryKeyConstraint("tenant", "run", name="pk_run_ending"),
    )
    op.create_table(
        "run_dispatch",
        _text("tenant"),
        _text("run"),
        _text("state"),
        sa.Column("attempt", sa.Integer(), nullable=False),
        sa.Column("crashes", sa.Integer(), nullable=False),
        _text("token", nullable=True),
        _text("finished_token", nullable=True),
        _text("lease_until", nullable=True),
        _text("deadline_at"),
        _text("started_at", nullable=True),
        sa.CheckConstraint(
            "(state = 'running') = (lease_until IS NOT NULL)", name=op.f("ck_run_dispatch_lease")
        ),
        sa.CheckConstraint(
            "(state = 'running') = (token IS NOT NULL)", name=op.f("ck_run_dispatch_token")
        ),
        sa.CheckConstraint(
            "finished_token IS NULL OR state NOT IN ('waiting', 'running')",
            name=op.f("ck_run_dispatch_finished_token"),
        ),
        sa.CheckConstraint("attempt >= 0", name=op.f("ck_run_dispatch_attempt")),
        sa.CheckConstraint("crashes >= 0", name=op.f("ck_run_dispatch_crashes")),
        sa.ForeignKeyConstraint(
            ["tenant", "run"], ["run.tenant", "run.id"], name="fk_run_dispatch_run"
        ),
        sa.PrimaryKeyConstraint("tenant", "run", name="pk_run_dispatch"),
        sa.UniqueConstraint("run", name="uq_run_dispatch_run"),
        sa.UniqueConstraint("token", name="uq_run_dispatch_token"),
    )
    op.create_index("ix_run_dispatch_state_run", "run_dispatch", ["state", "run"])


def _create_events() -> None:
    """Create the chains of events and what they say."""
    op.create_table(
        "event",
        _text("tenant"),
        _text("stream"),
        sa.Column("seq", sa.Integer(), nullable=False),
        sa.Column("format", sa.Integer(), nullable=False),
        _text("recorded_at"),
        _text("kind"),
        _text("actor"),
        _text("authentication"),
        _text("payload_digest", nullable=True),
        _text("previous"),
        _text("hash"),
        _digest("event", "hash"),
        _digest("event", "payload_digest", nullable=True),
        _digest("event", "previous"),
        sa.CheckConstraint(
            "tenant <> '' AND stream <> '' AND kind <> '' AND actor <> '' AND authentication <> ''",
            name=op.f("ck_event_who"),
        ),
        sa.CheckConstraint("format >= 1", name=op.f("ck_event_format")),
        _moment("event", "recorded_at"),
        sa.CheckConstraint("seq >= 1", name=op.f("ck_event_seq")),
        sa.PrimaryKeyConstraint("tenant", "stream", "seq", name="pk_event"),
    )
    op.create_table(
        "event_payload",
        _text("tenant"),
        _text("stream"),
        sa.Column("seq", sa.Integer(), nullable=False),
        sa.Column("salt", sa.LargeBinary(), nullable=False),
        _text("payload"),
        sa.CheckConstraint("length(salt) = 16", name=op.f("ck_event_payload_salt")),
        sa.ForeignKeyConstraint(
            ["tenant", "stream", "seq"],
            ["event.tenant", "event.stream", "event.seq"],
            name="fk_event_payload_event",
        ),
        sa.PrimaryKeyConstraint("tenant", "stream", "seq", name="pk_event_payload"),
    )


def _create_contents() -> None:
    """Create blobs, and the rows by which plans are searched."""
    op.create_table(
        "blob",
        _text("tenant"),
        _text("digest"),
        sa.Column("part", sa.Integer(), nullable=False),
        sa.Column("parts", sa.Integer(), nullable=False),
        sa.Column("unpacked_bytes", sa.BigInteger(), nullable=False),
        sa.Column("bytes", sa.LargeBinary(), nullable=False),
        _digest("blob", "digest"),
        sa.CheckConstraint("tenant <> ''", name=op.f("ck_blob_tenant")),
        sa.CheckConstraint("part >= 0 AND part < parts", name=op.f("ck_blob_part")),
        sa.CheckConstraint("unpacked_bytes >= 0", name=op.f("ck_blob_unpacked_bytes")),
        sa.PrimaryKeyConstraint("tenant", "digest", "part", name="pk_blob"),
    )
    op.create_table(
        "plan_line",
        _text("tenant"),
        _text("run"),
        sa.Column("position", sa.Integer(), nullable=False),
        _text("lane", nullable=True),
        _text("origin"),
        _text("destination"),
        _text("item"),
        _text("quantity"),
        sa.CheckConstraint("position >= 0", name=op.f("ck_plan_line_position")),
        sa.ForeignKeyConstraint(
            ["tenant", "run"], ["run.tenant", "run.id"], name="fk_plan_line_run"
        ),
        sa.PrimaryKeyConstraint("tenant", "run", "position", name="pk_plan_line"),
        sqlite_with_rowid=False,
    )
    op.create_table(
        "order_line",
        _text("tenant"),
        _text("run"),
        sa.Column("position", sa.Integer(), nullable=False),
        _text("reference"),
        _text("order", nullable=True),
        _text("site"),
        _text("item"),
        _text("quantity"),
        _text("served"),
        _text("short"),
        sa.CheckConstraint("position >= 0", name=op.f("ck_order_line_position")),
        sa.ForeignKeyConstraint(
            ["tenant", "run"], ["run.tenant", "run.id"], name="fk_order_line_run"
        ),
        sa.PrimaryKeyConstraint("tenant", "run", "position", name="pk_order_line"),
        sqlite_with_rowid=False,
    )


def _text(name: str, *, nullable: bool = False) -> sa.Column[str]:
    return sa.Column(name, PLAIN_TEXT, nullable=nullable)


def _digest(table: str, column: str, *, nullable: bool = False) -> sa.CheckConstraint:
    form = f"{column} LIKE 'sha-256:%' AND length({column}) = 72"
    return sa.CheckConstraint(
        f"{column} IS NULL OR {form}" if nullable else form,
        name=op.f(f"ck_{table}_{column}"),
    )


def _moment(table: str, column: str) -> sa.CheckConstraint:
    return sa.CheckConstraint(f"length({column}) = 27", name=op.f(f"ck_{table}_{column}"))


def _create_sqlite_triggers() -> None:
    for table in FACTS:
        for verb in ("delete", "update"):
            _refuse_on_sqlite(table, verb)
    _refuse_on_sqlite(DISPATCH, "delete")
    op.execute(
        f"CREATE TRIGGER {DISPATCH}_move BEFORE UPDATE ON {DISPATCH}"
        f" WHEN NOT ({LEGAL_MOVES})"
        " BEGIN SELECT RAISE(ABORT, 'lanewright: no legal move of a run'); END",
    )


def _refuse_on_sqlite(table: str, verb: str) -> None:
    op.execute(
        f"CREATE TRIGGER {table}_refuse_{verb} BEFORE {verb.upper()} ON {table} BEGIN"
        f" SELECT RAISE(ABORT, 'lanewright: facts are append-only: {verb} on {table}'); END",
    )


def _create_postgresql_triggers() -> None:
    op.execute(
        "CREATE FUNCTION lanewright_refuse() RETURNS trigger LANGUAGE plpgsql AS $$ BEGIN"
        " RAISE EXCEPTION 'lanewright: facts are append-only: % on %', TG_OP, TG_TABLE_NAME"
        " USING ERRCODE = 'restrict_violation'; END $$",
    )
    op.execute(
        "CREATE FUNCTION lanewright_dispatch() RETURNS trigger LANGUAGE plpgsql AS $$ BEGIN"
        f" IF {LEGAL_MOVES} THEN RETURN NEW; END IF;"
        " RAISE EXCEPTION 'lanewright: no legal move of a run: % to %', OLD.state, NEW.state"
        " USING ERRCODE = 'restrict_violation'; END $$",
    )
    for table in FACTS:
        _always(
            table,
            f"{table}_refuse",
            "BEFORE UPDATE OR DELETE OR TRUNCATE",
            "STATEMENT EXECUTE FUNCTION lanewright_refuse()",
        )
    _always(
        DISPATCH,
        f"{DISPATCH}_refuse",
        "BEFORE DELETE OR TRUNCATE",
        "STATEMENT EXECUTE FUNCTION lanewright_refuse()",
    )
    _always(
        DISPATCH,
        f"{DISPATCH}_move",
        "BEFORE UPDATE",
        "ROW EXECUTE FUNCTION lanewright_dispatch()",
    )


def _always(table: str, name: str, when: str, what: str) -> None:
    """Create a trigger that also fires where a session asks to be treated as a replica."""
    op.execute(f"CREATE TRIGGER {name} {when} ON {table} FOR EACH {what}")
    op.execute(f"ALTER TABLE {table} ENABLE ALWAYS TRIGGER {name}")
