# ruff: noqa: INP001 - Alembic finds revisions by their path
"""How Alembic meets the database: over the connection that ``service/store/migrate.py`` opened.

That connection is inside a transaction already, so that all revisions are applied or none.
"""

from alembic import context

from service.store.tables import Base

connection = context.config.attributes.get("connection")
if connection is None:
    raise SystemExit("migrations run through: lanewright migrate")
context.configure(
    connection=connection,
    target_metadata=Base.metadata,
    # SQLite can change most things about a table only by rebuilding it, which drops its triggers;
    # a revision that needs this is wrong here.
    render_as_batch=False,
)
with context.begin_transaction():
    context.run_migrations()
