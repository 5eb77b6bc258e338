# ruff: noqa: INP001 - Alembic finds revisions by their path
"""How far a run is, what planning it takes, and where the next run like it may start from.

What is written here stays as it is, whatever the models become: a revision is history. The columns
may be absent and nothing of the former release looks at them, so that it can run on meanwhile.
"""

import sqlalchemy as sa
from alembic import op

revision = "0002"
down_revision = "0001"
branch_labels = None
depends_on = None

PLAIN_TEXT = sa.Text().with_variant(sa.Text(collation="C"), "postgresql")

DISPATCH = "run_dispatch"
WARM_START = "warm_start"


def upgrade() -> None:
    """Add columns to the dispatch row, which is no fact, and a table that may be emptied."""
    op.add_column(DISPATCH, sa.Column("progress", PLAIN_TEXT, nullable=True))
    op.add_column(DISPATCH, sa.Column("likeness", PLAIN_TEXT, nullable=True))
    op.add_column(DISPATCH, sa.Column("memory_bytes", sa.BigInteger(), nullable=True))
    op.create_table(
        WARM_START,
        sa.Column("tenant", PLAIN_TEXT, nullable=False),
        sa.Column("run", PLAIN_TEXT, nullable=False),
        sa.Column("network_digest", PLAIN_TEXT, nullable=False),
        sa.Column("likeness", PLAIN_TEXT, nullable=True),
        sa.Column("digest", PLAIN_TEXT, nullable=False),
        sa.Column("packed_bytes", sa.Integer(), nullable=False),
        sa.Column("bytes", sa.LargeBinary(), nullable=False),
        sa.ForeignKeyConstraint(
            ["tenant", "run"], ["run.tenant", "run.id"], name="fk_warm_start_run"
        ),
        sa.PrimaryKeyConstraint("tenant", "run", name="pk_warm_start"),
    )
    op.create_index(
        "ix_warm_start_tenant_network_digest_run", WARM_START, ["tenant", "network_digest", "run"]
    )
    op.create_index("ix_warm_start_tenant_likeness_run", WARM_START, ["tenant", "likeness", "run"])


def downgrade() -> None:
    """Take both away; SQLite drops columns since 3.35, the version that is needed anyway."""
    op.drop_table(WARM_START)
    for column in ("memory_bytes", "likeness", "progress"):
        op.drop_column(DISPATCH, column)
