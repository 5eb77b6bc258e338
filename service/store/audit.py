"""The audit: every chain, every digest and every row against what it must agree with.

Nothing that is read is trusted, so that a row of any kind that was changed, added or taken away is
found and named. The audit reads one moment of the store and changes nothing.
"""

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Literal

from sqlalchemy.exc import DBAPIError, SQLAlchemyError
from sqlalchemy.orm import Session

from service.store.audit_contents import blob_problems, content_problems
from service.store.audit_problem import Problem, guarded
from service.store.audit_runs import number_problems, run_keys, run_problems
from service.store.audit_strays import stray_problems
from service.store.audit_streams import stream_problems
from service.store.database import READ_ONLY, Database, DatabaseRefused, open_database
from service.store.migrate import pending_in
from service.store.triggers import trigger_faults

Verdict = Literal["intact", "broken", "unreadable"]

__all__ = ["AuditVerdict", "Problem", "Verdict", "audit", "check_store"]


@dataclass(frozen=True, slots=True, kw_only=True)
class AuditVerdict:
    """What an audit found; ``problems`` begin with the first broken link."""

    verdict: Verdict
    problems: tuple[Problem, ...]


def audit(url: str) -> AuditVerdict:
    """Audit the database at ``url``; ``unreadable`` where there is none to be audited."""
    try:
        database = open_database(url)
    except DatabaseRefused as error:
        return _unreadable(str(error))
    try:
        return check_store(database)
    finally:
        database.close()


def check_store(database: Database) -> AuditVerdict:
    """Audit an open database."""
    options: dict[str, object] = {READ_ONLY: True}
    if not database.is_sqlite:
        options |= {"isolation_level": "REPEATABLE READ", "postgresql_readonly": True}
    engine = database.engine.execution_options(**options)
    try:
        with Session(engine) as session, session.begin():
            waiting = pending_in(session.connection())
            if waiting:
                return _unreadable(f"migrations {', '.join(waiting)} are not applied")
            problems = tuple(_problems(session))
    except DBAPIError as error:
        return _unreadable(str(error.orig).strip().split("\n", maxsplit=1)[0])
    except SQLAlchemyError as error:
        return _unreadable(str(error))
    return AuditVerdict(verdict="broken" if problems else "intact", problems=problems)


def _problems(session: Session) -> Iterator[Problem]:
    yield from guarded(stream_problems(session), code="chain", place="event")
    yield from stray_problems(session)
    yield from guarded(number_problems(session), code="run_row", place="run")
    for tenant, run_id in run_keys(session):
        place = f"{tenant}/run {run_id}"
        yield from guarded(run_problems(session, tenant, run_id), code="run_row", place=place)
        yield from guarded(content_problems(session, tenant, run_id), code="content", place=place)
        session.expunge_all()  # or every row of every run would stay in memory
    yield from guarded(blob_problems(session), code="blob", place="blob")
    for fault in trigger_faults(session.connection()):
        yield Problem(code="trigger", place="database", detail=fault)


def _unreadable(detail: str) -> AuditVerdict:
    problem = Problem(code="unreadable", place="database", detail=detail)
    return AuditVerdict(verdict="unreadable", problems=(problem,))
