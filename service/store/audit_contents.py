"""The audit of contents: blobs against their digests, networks against theirs, rows against plans.

The plan blob is the record; the rows of plan lines and order lines are an index of it.
"""

import hashlib
import io
import itertools
import zipfile
from collections.abc import Iterator, Mapping
from typing import Any

import orjson
from sqlalchemy import select
from sqlalchemy.orm import Session

from service.network.canonical import HEAD_ENTRY
from service.network.canonical import digest as digest_of
from service.runs.faults import BlobBroken
from service.runs.index_rows import order_line_rows, plan_line_rows
from service.runs.run import RunState
from service.store.audit_problem import Problem
from service.store.blob_repository import SqlBlobRepository, unpack
from service.store.index_repository import SqlIndexRepository
from service.store.tables import BlobRow, RunEndingRow, RunRow


def blob_problems(session: Session) -> Iterator[Problem]:
    """Yield every blob that is incomplete, or has other content than its digest says."""
    keys = select(BlobRow.tenant, BlobRow.digest).distinct()
    keys = keys.order_by(BlobRow.tenant, BlobRow.digest)
    for tenant, digest in session.execute(keys).all():
        fault = _blob_fault(session, tenant, digest)
        if fault is not None:
            yield Problem(code="blob", place=f"{tenant}/blob {digest}", detail=fault)


def _blob_fault(session: Session, tenant: str, digest: str) -> str | None:
    running = hashlib.sha256()
    length = 0
    numbers = select(BlobRow.part, BlobRow.parts, BlobRow.unpacked_bytes).where(
        BlobRow.tenant == tenant,
        BlobRow.digest == digest,
    )
    rows = session.execute(numbers.order_by(BlobRow.part)).all()
    for expected, row in enumerate(rows):
        if row.part != expected or row.parts != rows[0].parts:
            return f"part {expected} is missing"
        content = select(BlobRow.packed).where(
            BlobRow.tenant == tenant,
            BlobRow.digest == digest,
            BlobRow.part == row.part,
        )
        try:
            part = unpack(session.execute(content).scalar_one())
        except (BlobBroken, TypeError) as error:
            return f"part {expected} cannot be read: {error}"
        running.update(part)
        length += len(part)
    if len(rows) != rows[0].parts:
        # Half written and referred to by nobody is what a killed process leaves behind; whoever
        # refers to it is named by ``content_problems``.
        return None
    if "sha-256:" + running.hexdigest() != digest:
        return "the content has another digest"
    if any(row.unpacked_bytes != length for row in rows):
        return "the content has another length"
    return None


def content_problems(session: Session, tenant: str, run_id: str) -> Iterator[Problem]:
    """Yield what is missing of a run's contents, and where they contradict each other."""
    try:
        run = session.get_one(RunRow, (tenant, run_id))
        ending = session.get(RunEndingRow, (tenant, run_id))
    except (ValueError, TypeError):
        return  # named by run_problems
    blobs = SqlBlobRepository(session)
    digests = [run.request_digest, run.normal_digest, run.intake_digest, run.options_digest]
    if ending is not None:
        digests += [d for d in (ending.plan_digest, ending.certificate_digest) if d is not None]
    for digest in digests:
        if not blobs.has(tenant, digest):
            yield Problem(
                code="blob_missing",
                place=f"{tenant}/blob {digest}",
                detail=f"run {run_id} refers to a blob that is not there, or not whole",
            )
    place = f"{tenant}/run {run_id}"
    try:
        entries = _entries(_content(session, tenant, run.normal_digest))
        yield from _network_problems(entries, run.network_digest, place)
        intake = orjson.loads(_content(session, tenant, run.intake_digest))
        if intake.get("request_digest") != run.request_digest:
            yield Problem(code="network", place=place, detail="intake saw other bytes")
    except BlobBroken:
        pass  # named with the blobs
    except (ValueError, KeyError, AttributeError, zipfile.BadZipFile) as error:
        yield Problem(code="network", place=place, detail=f"the network cannot be read: {error}")
    yield from _row_problems(session, run, ending)


def _content(session: Session, tenant: str, digest: str) -> bytes:
    content = b"".join(SqlBlobRepository(session).parts(tenant, digest))
    if digest_of(content) != digest:
        raise BlobBroken(f"blob {digest} has other content")
    return content


def _entries(content: bytes) -> dict[str, bytes]:
    with zipfile.ZipFile(io.BytesIO(content)) as archive:
        return {name: archive.read(name) for name in archive.namelist()}


def _network_problems(
    entries: Mapping[str, bytes],
    network_digest: str,
    place: str,
) -> Iterator[Problem]:
    head = entries[HEAD_ENTRY]
    if digest_of(head) != network_digest:
        yield Problem(code="network", place=place, detail="the network has another digest")
    named = {HEAD_ENTRY}
    for table, form in orjson.loads(head)["tables"].items():
        for column, described in form["columns"].items():
            name = f"network/{table}/{column}"
            named.add(name)
            content = entries.get(name)
            if content is None:
                yield Problem(code="network", place=place, detail=f"column {name} is missing")
            elif digest_of(content) != described["digest"]:
                yield Problem(code="network", place=place, detail=f"column {name} has changed")
    for name in sorted(entries.keys() - named):
        yield Problem(code="network", place=place, detail=f"entry {name} is one too many")


def _row_problems(session: Session, run: RunRow, ending: RunEndingRow | None) -> Iterator[Problem]:
    place = f"{run.tenant}/run {run.id}"
    plan: Mapping[str, Any] = {"plan_lines": [], "order_lines": []}
    searchable = {RunState.PLANNED.value, RunState.NO_PLAN.value}
    if ending is not None and ending.state in searchable and ending.plan_digest is not None:
        try:
            plan = orjson.loads(_content(session, run.tenant, ending.plan_digest))
        except BlobBroken:
            return  # named with the blobs
        if (plan.get("network_digest"), plan.get("options_digest")) != (
            run.network_digest,
            run.options_digest,
        ):
            yield Problem(code="plan", place=place, detail="the plan is of another network")
    index = SqlIndexRepository(session)
    for code, expected, found in (
        ("plan_line", plan_line_rows(plan), index.plan_lines(run.id, run.tenant)),
        ("order_line", order_line_rows(plan), index.order_lines(run.id, run.tenant)),
    ):
        pairs = itertools.zip_longest(expected, found)
        for position, (wanted, row) in enumerate(pairs):
            if row is None or wanted is None or dict(row) != wanted:
                yield Problem(
                    code=code,
                    place=f"{place} {code} {position}",
                    detail="the row is not what the plan says",
                )
                break  # after a row too many or too few, every later one differs
