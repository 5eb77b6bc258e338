r"""The rights that the service needs on PostgreSQL, and no more.

Triggers refuse to change facts; a role that owns the tables could drop them. So an operator lets
the owner migrate (``lanewright migrate``) and the service run as a role of this kind:

    python -c "from service.store.service_role import service_role_sql as sql
    print(*sql('lanewright_service'), sep=';\n', end=';')" | psql ... as the owner
"""

from typing import Final

from sqlalchemy import create_mock_engine

from service.store.tables import CACHE_TABLE, DISPATCH_TABLE, FACT_TABLES, RunDispatchRow

# What a run is called by never changes, nor does its deadline.
_FIXED: Final = frozenset({"tenant", "run", "deadline_at"})


def service_role_sql(role: str) -> list[str]:
    """Return the statements that give ``role`` its rights; run them as the owner of the tables.

    The role must exist (``CREATE ROLE ... LOGIN``). Facts are read and appended, the dispatch row
    is also updated in the columns that move; nothing but a cache is deleted, nothing truncated or
    created. After a migration the statements are to be run again.
    """
    name = _quoted(role)
    moving = ", ".join(
        column.name for column in RunDispatchRow.__table__.columns if column.name not in _FIXED
    )
    return [
        f"GRANT USAGE ON SCHEMA public TO {name}",
        f"REVOKE ALL ON ALL TABLES IN SCHEMA public FROM {name}",
        f"GRANT SELECT, INSERT ON {', '.join((*FACT_TABLES, DISPATCH_TABLE))} TO {name}",
        f"GRANT UPDATE ({moving}) ON {DISPATCH_TABLE} TO {name}",
        f"GRANT SELECT, INSERT, DELETE ON {CACHE_TABLE} TO {name}",
        f"GRANT SELECT ON alembic_version TO {name}",
    ]


def _quoted(role: str) -> str:
    engine = create_mock_engine("postgresql+psycopg://", lambda *_: None)
    return engine.dialect.identifier_preparer.quote_identifier(role)
