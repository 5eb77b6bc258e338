"""Whether the process lives, and whether it can do its work."""

from fastapi import APIRouter

from service.doors.http import problem_kinds as kinds
from service.doors.http.dependencies import DoorDep, NoParameters
from service.doors.http.described import problem_responses
from service.doors.http.problems import RETRY_SECONDS_BUSY, Problem
from service.doors.http.schemas import AliveOut, ReadyOut

router = APIRouter(tags=["health"])


@router.get(
    "/healthz",
    operation_id="read_liveness",
    dependencies=[NoParameters],
    responses=problem_responses(kinds.INVALID_PARAMETERS),
)
async def read_liveness() -> AliveOut:
    """Say that the process answers. It touches nothing: no disk, no database, no child."""
    return AliveOut(alive=True)


@router.get(
    "/readyz",
    operation_id="read_readiness",
    dependencies=[NoParameters],
    responses=problem_responses(kinds.INVALID_PARAMETERS, kinds.NOT_READY, kinds.BUSY),
)
def read_readiness(door: DoorDep) -> ReadyOut:
    """Say whether runs can be accepted and planned; if not, what is missing."""
    missing = door.application.readiness()
    if missing:
        raise Problem(
            kinds.NOT_READY,
            "; ".join(missing),
            headers={"Retry-After": str(RETRY_SECONDS_BUSY)},
            members={"missing": missing},
        )
    return ReadyOut(ready=True)
