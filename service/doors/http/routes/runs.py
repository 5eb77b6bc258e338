"""Runs: a network is accepted, and what became of it can be asked."""

from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from functools import partial
from typing import Annotated, Final

from anyio.to_thread import run_sync
from fastapi import APIRouter, Depends, Request, Response, status

from service.doors.http import problem_kinds as kinds
from service.doors.http.dependencies import (
    ActorDep,
    Door,
    DoorDep,
    NoParameters,
    RunIdDep,
    query_parameters,
)
from service.doors.http.described import (
    REQUEST_ID_HEADER,
    RETRY_AFTER_HEADER,
    problem_responses,
)
from service.doors.http.preferences import applied, read_preferences
from service.doors.http.problems import RETRY_SECONDS, RETRY_SECONDS_BUSY, UNFINISHED, Problem
from service.doors.http.run_options import HEADER_PARAMETERS, OPTION_PARAMETERS
from service.doors.http.schemas import RunOut
from service.doors.http.spool import Spooled
from service.network.faults import Fault, Status, value_text
from service.network.files.media_types import NETWORK_TYPES, accepted_type, refusal_of
from service.network.options import Options, read_options

router = APIRouter(prefix="/v1/runs", tags=["runs"])

ENCODINGS: Final = ("gzip", "zstd")

REFUSED_AS: Final = {
    Status.UNREADABLE: kinds.UNREADABLE_BODY,
    Status.TOO_LARGE: kinds.BODY_TOO_LARGE,
    Status.INVALID: kinds.INVALID_NETWORK,
    Status.UNSUPPORTED: kinds.UNSUPPORTED_MEDIA_TYPE,
}


@dataclass(frozen=True, slots=True, kw_only=True)
class Form:
    """In which form a network is sent, and how its bytes are packed as a whole."""

    media_type: str
    content_encoding: str | None


def _options(request: Request) -> Options:
    """Read the options of a run; every fault of query and headers at once."""
    options, faults = read_options(query_parameters(request))
    key = request.headers.get("idempotency-key")
    if key is not None:
        faults = (
            *faults,
            Fault(
                pointer="Idempotency-Key:",
                code="not_yet",
                detail="Repeated requests are not recognised yet. Leave the header out.",
                value=value_text(key),
            ),
        )
    if options is None or faults:
        only_not_yet = all(fault.code == "not_yet" for fault in faults)
        raise Problem(
            kinds.NOT_YET if only_not_yet else kinds.INVALID_PARAMETERS,
            faults[0].detail if len(faults) == 1 else f"There are {len(faults)} faults.",
            errors=faults,
        )
    return options


def _form(request: Request) -> Form:
    """Return in which form the body is, having refused every one that is not read here."""
    sent = request.headers.get("content-type", "")
    media_type = accepted_type(sent)
    if media_type is None:
        raise Problem(
            kinds.UNSUPPORTED_MEDIA_TYPE,
            f"{refusal_of(sent)} Content-Type is {value_text(sent) or 'missing'}.",
            headers={"Accept": ", ".join(NETWORK_TYPES)},
        )
    fields = request.headers.getlist("content-encoding")
    codings = [part.strip().lower() for field in fields for part in field.split(",")]
    packed = [coding for coding in codings if coding not in {"", "identity"}]
    if len(packed) > 1 or any(coding not in ENCODINGS for coding in packed):
        raise Problem(
            kinds.UNSUPPORTED_ENCODING,
            f"Content-Encoding must be one of {', '.join(ENCODINGS)}, or absent.",
            headers={"Accept-Encoding": ", ".join((*ENCODINGS, "identity"))},
        )
    return Form(media_type=media_type, content_encoding=packed[0] if packed else None)


OptionsDep = Annotated[Options, Depends(_options)]
FormDep = Annotated[Form, Depends(_form)]


@contextmanager
def _place(door: Door) -> Iterator[None]:
    """Hold one of the places for bodies under way; refuse when all are taken."""
    if len(door.bodies) >= door.bodies_max:
        raise Problem(
            kinds.BUSY,
            "Too many networks are being checked at the moment.",
            headers={"Retry-After": str(RETRY_SECONDS_BUSY)},
        )
    door.bodies.append(None)
    try:
        yield
    finally:
        door.bodies.pop()


async def _check(door: Door, spooled: Spooled, options: Options, form: Form) -> None:
    """Have the body checked in a child; raise its faults as one problem."""
    report = await run_sync(
        partial(
            door.application.intake,
            spooled.path,
            spooled.folder,
            options=options,
            media_type=form.media_type,
            content_encoding=form.content_encoding,
        ),
        # Callers wait here without a thread until a child is free to take them.
        limiter=door.intake_slots,
    )
    if report.status == Status.ACCEPTED:
        return
    count = report.fault_count
    raise Problem(
        REFUSED_AS[Status(report.status)],
        report.faults[0].detail if count == 1 else f"There are {count} faults.",
        errors=report.faults,
        error_count=count,
    )


@router.post(
    "",
    operation_id="create_run",
    status_code=status.HTTP_202_ACCEPTED,
    responses={
        202: {
            "description": "The network is checked and the run is stored; it will be planned.",
            "headers": {
                "Location": {
                    "description": "The path of the run.",
                    "schema": {"type": "string"},
                },
                "Retry-After": RETRY_AFTER_HEADER,
                "Preference-Applied": {
                    "description": "respond-async, if Prefer asked for it.",
                    "schema": {"type": "string"},
                },
                "X-Request-ID": REQUEST_ID_HEADER,
            },
        },
        **problem_responses(
            kinds.UNREADABLE_BODY,
            kinds.BODY_TOO_SLOW,
            kinds.BODY_TOO_LARGE,
            kinds.PLAN_TOO_LARGE,
            kinds.UNSUPPORTED_MEDIA_TYPE,
            kinds.UNSUPPORTED_ENCODING,
            kinds.INVALID_NETWORK,
            kinds.INVALID_PARAMETERS,
            kinds.NOT_YET,
            kinds.BUSY,
        ),
    },
    openapi_extra={"parameters": [*OPTION_PARAMETERS, *HEADER_PARAMETERS]},
)
async def create_run(  # noqa: PLR0913, PLR0917 - one argument for each thing that a request brings
    request: Request,
    response: Response,
    door: DoorDep,
    actor: ActorDep,
    form: FormDep,
    options: OptionsDep,
) -> RunOut:
    """Accept a network and plan it.

    The body is the network alone, as JSON, as a zip of tables or as a workbook; how it is planned
    is said by the query parameters. A network that has no plan is accepted all the same: that is
    an answer, not a fault. The answer 202 means that the run is on disk and survives a restart; ask
    at its Location for what became of it.
    """
    with _place(door):
        async with door.spool.workspace() as folder:
            spooled = await door.spool.receive(request, folder)
            await _check(door, spooled, options, form)
            run = await run_sync(
                partial(door.application.submit, folder, options, actor, spooled.wire_digest)
            )
    answer = RunOut.from_domain(run)
    response.headers["Location"] = answer.links.self
    response.headers["Retry-After"] = str(RETRY_SECONDS)
    response.headers.update(applied(read_preferences(request.headers.getlist("prefer"))))
    return answer


@router.get(
    "/{run_id}",
    operation_id="read_run",
    dependencies=[NoParameters],
    responses={
        200: {
            "description": "The run as it is now.",
            "headers": {"Retry-After": RETRY_AFTER_HEADER, "X-Request-ID": REQUEST_ID_HEADER},
        },
        **problem_responses(kinds.RUN_UNKNOWN, kinds.INVALID_PARAMETERS, kinds.BUSY),
    },
)
def read_run(run_id: RunIdDep, response: Response, door: DoorDep, actor: ActorDep) -> RunOut:
    """Say how a run stands. While it waits or is planned, Retry-After says when to ask again."""
    run = door.application.run(run_id, actor.tenant)
    if run.state in UNFINISHED:
        response.headers["Retry-After"] = str(RETRY_SECONDS)
    return RunOut.from_domain(run)
