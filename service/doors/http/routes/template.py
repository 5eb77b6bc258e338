"""The workbook to start from."""

from contextlib import AsyncExitStack
from typing import Final

from fastapi import APIRouter, Request
from starlette.background import BackgroundTask
from starlette.responses import FileResponse, Response

from service.doors.http import problem_kinds as kinds
from service.doors.http.dependencies import DoorDep, NoParameters
from service.doors.http.described import REQUEST_ID_HEADER, problem_responses
from service.doors.http.representations import choose
from service.doors.http.tables import write_template
from service.network.files.media_types import XLSX

router = APIRouter(prefix="/v1", tags=["runs"])

FILE_NAME: Final = "network-template.xlsx"


@router.get(
    "/template.xlsx",
    operation_id="read_template",
    dependencies=[NoParameters],
    response_class=Response,
    responses={
        200: {
            "description": "The workbook.",
            "headers": {"X-Request-ID": REQUEST_ID_HEADER},
            "content": {XLSX: {"schema": {}}},
        },
        **problem_responses(kinds.INVALID_PARAMETERS, kinds.NOT_ACCEPTABLE, kinds.BUSY),
    },
)
async def read_template(request: Request, door: DoorDep) -> Response:
    """Answer a workbook with a sheet for each table of a network, notes, and a tiny example.

    It can be posted to /v1/runs as it stands.
    """
    choose(request.headers, [XLSX])
    async with AsyncExitStack() as stack:
        folder = await stack.enter_async_context(door.spool.workspace())
        path = await write_template(folder)
        return FileResponse(
            path,
            media_type=XLSX,
            headers={"Content-Disposition": f'attachment; filename="{FILE_NAME}"'},
            background=BackgroundTask(stack.pop_all().aclose),
        )
