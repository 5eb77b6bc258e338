"""What belongs to a run: its plan, certificate, network, history and evidence, as stored."""

from collections.abc import AsyncIterator
from contextlib import AsyncExitStack
from functools import partial
from pathlib import Path
from typing import Annotated, Any, Final

from anyio.to_thread import run_sync
from fastapi import APIRouter, Depends, Request
from starlette.background import BackgroundTask
from starlette.responses import FileResponse, Response, StreamingResponse

from service.doors.http import problem_kinds as kinds
from service.doors.http.dependencies import (
    ActorDep,
    Door,
    DoorDep,
    NoParameters,
    RunIdDep,
    only_parameters,
)
from service.doors.http.described import (
    ETAG_HEADER,
    IF_NONE_MATCH,
    NOT_MODIFIED,
    REQUEST_ID_HEADER,
    problem_responses,
)
from service.doors.http.problems import Problem
from service.doors.http.representations import already_held, choose, entity_tag
from service.doors.http.schemas import PLANNED_STATES, HistoryOut
from service.doors.http.tables import write_table, write_whole
from service.doors.plan_tables import COLUMNS
from service.network.faults import Fault
from service.network.files.media_types import (
    CSV,
    JSON,
    PARQUET,
    XLSX,
    ZIP,
    content_type_of,
)
from service.runs.faults import ArtefactMissing
from service.runs.run import Actor, Run, RunId

router = APIRouter(prefix="/v1/runs/{run_id}", tags=["runs"])

# Forms of one table, by what its file name ends in, and of the plan as a whole.
TABLE_FORMS: Final = {CSV: "csv", PARQUET: "parquet"}
# What the server hands to the socket at a time, so that a slow reader holds one piece in its
# buffer and not the whole plan.
PIECE_BYTES: Final = 256 * 1024

PlanParametersDep = Annotated[dict[str, str], Depends(only_parameters(table=tuple(COLUMNS)))]
NetworkParametersDep = Annotated[
    dict[str, str], Depends(only_parameters(form=("normal", "received")))
]

COMMON_PROBLEMS: Final = (kinds.RUN_UNKNOWN, kinds.INVALID_PARAMETERS, kinds.BUSY)


def _found(*media_types: str, description: str) -> dict[str, Any]:
    """Return the description of an answer with an entity tag."""
    return {
        "description": description,
        "headers": {"ETag": ETAG_HEADER, "X-Request-ID": REQUEST_ID_HEADER},
        "content": {media_type: {"schema": _SCHEMAS[media_type]} for media_type in media_types},
    }


_SCHEMAS: Final[dict[str, dict[str, object]]] = {
    JSON: {"type": "object"},
    CSV: {"type": "string"},
    # OpenAPI 3.1 describes bytes by their media type alone.
    ZIP: {},
    XLSX: {},
    PARQUET: {},
}


async def _planned_run(door: Door, run_id: RunId, actor: Actor, artefact: str) -> Run:
    """Return a run whose plan or proof that there is none may be handed out.

    A plan whose certificate failed is kept for whoever looks for the mistake; it is no plan.
    """
    run = await run_sync(partial(door.application.run, run_id, actor.tenant))
    if run.state not in PLANNED_STATES:
        raise ArtefactMissing(run, artefact)
    return run


def _tag_headers(tag: str) -> dict[str, str]:
    """Return the headers of what never changes: keep it, but ask whether you still may see it."""
    return {"ETag": tag, "Cache-Control": "private, no-cache", "Vary": "Accept"}


def _whole(content: bytes, media_type: str, headers: dict[str, str]) -> Response:
    """Return stored bytes as an answer, handed over in pieces."""

    async def pieces() -> AsyncIterator[memoryview]:
        view = memoryview(content)
        for start in range(0, len(view), PIECE_BYTES):
            yield view[start : start + PIECE_BYTES]

    length = {"Content-Length": str(len(content))}
    return StreamingResponse(pieces(), media_type=media_type, headers={**headers, **length})


def _not_modified(tag: str) -> Response:
    return Response(status_code=304, headers=_tag_headers(tag))


@router.get(
    "/plan",
    operation_id="read_plan",
    response_class=Response,
    responses={
        200: _found(JSON, XLSX, CSV, PARQUET, description="The plan, or one of its tables."),
        304: NOT_MODIFIED,
        **problem_responses(*COMMON_PROBLEMS, kinds.NOT_ACCEPTABLE, kinds.ARTEFACT_MISSING),
    },
    openapi_extra={
        "parameters": [
            IF_NONE_MATCH,
            {
                "name": "table",
                "in": "query",
                "required": False,
                "description": "The table to answer as CSV (RFC 4180, UTF-8, with a header; a "
                "text that a spreadsheet would take for a formula has an apostrophe in front) or "
                "as Parquet (amounts are decimal128(38, 12); a column with one that does not fit "
                "is text). totals has the rows of each other table and the sums of its columns.",
                "schema": {"type": "string", "enum": list(COLUMNS)},
                "example": "plan_lines",
            },
        ]
    },
)
async def read_plan(
    request: Request, run_id: RunIdDep, door: DoorDep, actor: ActorDep, values: PlanParametersDep
) -> Response:
    """Answer the plan of a run: whole as JSON or XLSX, or one table of it as CSV or Parquet.

    A run that has no plan answers that, with the reason, as JSON. Quantities are in item units,
    money in the currency of the network; both are exact: decimal strings, and in a workbook
    numbers of at most 15 digits, else text.
    """
    of_tables = list(TABLE_FORMS)
    offered = of_tables if "table" in values else [JSON, XLSX, *of_tables]
    media_type = choose(request.headers, offered)
    if media_type in TABLE_FORMS and "table" not in values:
        missing = Fault(
            pointer="?table",
            code="missing_parameter",
            detail=f"Say which table: {', '.join(COLUMNS)}.",
        )
        raise Problem(kinds.INVALID_PARAMETERS, missing.detail, errors=[missing])
    run = await _planned_run(door, run_id, actor, "plan")
    ending = TABLE_FORMS.get(media_type, "xlsx")
    form = f"{values.get('table', 'plan')}.{ending}" if media_type != JSON else ""
    tag = entity_tag(str(run.plan_digest), form=form)
    if already_held(request.headers, tag):
        return _not_modified(tag)
    plan = await run_sync(partial(door.application.plan_bytes, run_id, actor.tenant))
    if media_type == JSON:
        return _whole(plan, JSON, _tag_headers(tag))
    async with AsyncExitStack() as stack:
        folder = await stack.enter_async_context(door.spool.workspace())
        if media_type == XLSX:
            path = await write_whole(plan, folder)
        else:
            path = await write_table(plan, ending, values["table"], folder)
        headers = {
            **_tag_headers(tag),
            "Content-Disposition": f'attachment; filename="{_file_name(run.number, form)}"',
        }
        parameters = "; charset=utf-8; header=present" if media_type == CSV else ""
        return _file(path, f"{media_type}{parameters}", headers, stack.pop_all())


@router.get(
    "/certificate",
    operation_id="read_certificate",
    dependencies=[NoParameters],
    response_class=Response,
    responses={
        200: _found(JSON, description="The certificate."),
        304: NOT_MODIFIED,
        **problem_responses(*COMMON_PROBLEMS, kinds.NOT_ACCEPTABLE, kinds.ARTEFACT_MISSING),
    },
    openapi_extra={"parameters": [IF_NONE_MATCH]},
)
async def read_certificate(
    request: Request, run_id: RunIdDep, door: DoorDep, actor: ActorDep
) -> Response:
    """Answer the data that proves the plan: flows, prices and bounds, item by item."""
    choose(request.headers, [JSON])
    run = await _planned_run(door, run_id, actor, "certificate")
    tag = entity_tag(str(run.certificate_digest))
    if already_held(request.headers, tag):
        return _not_modified(tag)
    content = await run_sync(partial(door.application.certificate_bytes, run_id, actor.tenant))
    return _whole(content, JSON, _tag_headers(tag))


@router.get(
    "/network",
    operation_id="read_network",
    response_class=Response,
    responses={
        200: _found(ZIP, JSON, XLSX, description="The network, in the form that was asked for."),
        304: NOT_MODIFIED,
        **problem_responses(*COMMON_PROBLEMS, kinds.NOT_ACCEPTABLE),
    },
    openapi_extra={
        "parameters": [
            IF_NONE_MATCH,
            {
                "name": "form",
                "in": "query",
                "required": False,
                "description": "normal: a zip of the head and one file per column, over which "
                "network_digest is taken. received: the bytes of the body, unpacked.",
                "schema": {"type": "string", "enum": ["normal", "received"], "default": "normal"},
                "example": "received",
            },
        ]
    },
)
async def read_network(
    request: Request,
    run_id: RunIdDep,
    door: DoorDep,
    actor: ActorDep,
    values: NetworkParametersDep,
) -> Response:
    """Answer the network that was planned: in normal form, or the body as it was received."""
    form = values.get("form", "normal")
    # What was received is in the form in which it was sent, which its bytes tell.
    choose(request.headers, [ZIP] if form == "normal" else [JSON, ZIP, XLSX])
    run = await run_sync(partial(door.application.run, run_id, actor.tenant))
    digest = run.network_digest if form == "normal" else run.request_digest
    tag = entity_tag(digest, form=form)
    if already_held(request.headers, tag):
        return _not_modified(tag)
    content = await run_sync(
        partial(door.application.network_bytes, run_id, actor.tenant, form=form)
    )
    headers = _tag_headers(tag)
    media_type = ZIP if form == "normal" else content_type_of(content)
    choose(request.headers, [media_type])
    if form == "normal":
        name = _file_name(run.number, "network.zip")
        headers["Content-Disposition"] = f'attachment; filename="{name}"'
    return _whole(content, media_type, headers)


@router.get(
    "/history",
    operation_id="read_history",
    dependencies=[NoParameters],
    responses=problem_responses(*COMMON_PROBLEMS),
)
def read_history(run_id: RunIdDep, door: DoorDep, actor: ActorDep) -> HistoryOut:
    """Answer who did what to the run and when, oldest first, each entry chained to the last."""
    events = door.application.history(run_id, actor.tenant)
    return HistoryOut.model_validate({"run": run_id, "events": events})


@router.get(
    "/evidence",
    operation_id="read_evidence",
    dependencies=[NoParameters],
    response_class=Response,
    responses={
        200: {
            "description": "A zip with network, options, plan, certificate, history, and a "
            "program of plain Python that checks them all: python3 verify.py evidence.zip.",
            "headers": {"X-Request-ID": REQUEST_ID_HEADER},
            "content": {ZIP: {"schema": _SCHEMAS[ZIP]}},
        },
        **problem_responses(*COMMON_PROBLEMS, kinds.NOT_ACCEPTABLE, kinds.ARTEFACT_MISSING),
    },
)
async def read_evidence(
    request: Request, run_id: RunIdDep, door: DoorDep, actor: ActorDep
) -> Response:
    """Answer everything that somebody needs to check the run without this service."""
    choose(request.headers, [ZIP])
    async with AsyncExitStack() as stack:
        folder = await stack.enter_async_context(door.spool.workspace())
        path = folder / "evidence.zip"
        await run_sync(partial(door.application.evidence, run_id, actor.tenant, path))
        run = await run_sync(partial(door.application.run, run_id, actor.tenant))
        name = _file_name(run.number, "evidence.zip")
        headers = {"Content-Disposition": f'attachment; filename="{name}"'}
        return _file(path, ZIP, headers, stack.pop_all())


def _file(path: Path, media_type: str, headers: dict[str, str], stack: AsyncExitStack) -> Response:
    """Return a file as an answer; ``stack`` is unwound, and the file gone, when it is sent."""
    return FileResponse(
        path, media_type=media_type, headers=headers, background=BackgroundTask(stack.aclose)
    )


def _file_name(number: str, what: str) -> str:
    """Return the name under which a browser saves something of the run with ``number``."""
    return f"{number.replace('/', '-')}-{what}"
