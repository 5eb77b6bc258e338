"""The audit of rows that belong to nothing: payloads without event, rows of a run without a run."""

from collections.abc import Iterator

from sqlalchemy import and_, select
from sqlalchemy.orm import Session

from service.store.audit_problem import Problem
from service.store.tables import (
    EventPayloadRow,
    EventRow,
    OrderLineRow,
    PlanLineRow,
    RunDispatchRow,
    RunEndingRow,
    RunRow,
)

# Every table with a column ``run``, but for the cache, which is nobody's record.
OF_A_RUN = (RunDispatchRow, RunEndingRow, PlanLineRow, OrderLineRow)


def stray_problems(session: Session) -> Iterator[Problem]:
    """Yield rows that belong to nothing: foreign keys forbid them, unless they were off."""
    payloads = (
        select(EventPayloadRow.tenant, EventPayloadRow.stream, EventPayloadRow.seq)
        .outerjoin(
            EventRow,
            and_(
                EventRow.tenant == EventPayloadRow.tenant,
                EventRow.stream == EventPayloadRow.stream,
                EventRow.seq == EventPayloadRow.seq,
            ),
        )
        .where(EventRow.tenant.is_(None))
        .order_by(EventPayloadRow.tenant, EventPayloadRow.stream, EventPayloadRow.seq)
    )
    for row in session.execute(payloads):
        yield Problem(
            code="payload_without_event",
            place=f"{row.tenant}/{row.stream}#{row.seq}",
            detail="a payload whose event is not there",
        )
    for table in OF_A_RUN:
        name = table.__tablename__
        strays = (
            select(table.tenant, table.run)
            .distinct()
            .outerjoin(RunRow, and_(RunRow.tenant == table.tenant, RunRow.id == table.run))
            .where(RunRow.tenant.is_(None))
            .order_by(table.tenant, table.run)
        )
        for stray in session.execute(strays):
            yield Problem(
                code="row_without_run",
                place=f"{stray.tenant}/{name} {stray.run}",
                detail="a row of a run that is not there",
            )
