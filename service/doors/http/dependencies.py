"""What routes get handed: the use cases, who asks, and parameters that were checked."""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Annotated, Any, Final
from urllib.parse import parse_qsl

from anyio import CapacityLimiter
from fastapi import Depends, Path, Request

from service.doors.http import problem_kinds as kinds
from service.doors.http.problems import Problem
from service.doors.http.schemas import RUN_ID_PATTERN
from service.doors.http.security import current_actor
from service.doors.http.spool import Spool
from service.network.faults import Fault, value_text
from service.runs.run import Actor, RunId
from service.runs.use_cases import Application

PARAMETERS_MAX: Final = 100


@dataclass(frozen=True, slots=True, kw_only=True)
class Door:
    """What this door was built with; one for each application object, never a global.

    ``intake_slots`` lets as many checks begin as there are children for them; ``bodies_max``
    bounds how many bodies may be under way or wait for their check.
    """

    application: Application
    spool: Spool
    intake_slots: CapacityLimiter
    bodies_max: int
    bodies: list[None]


def _door(request: Request) -> Door:
    door = request.app.state.door
    assert isinstance(door, Door)  # noqa: S101 - app.py puts it there
    return door


DoorDep = Annotated[Door, Depends(_door)]
ActorDep = Annotated[Actor, Depends(current_actor)]
RunIdDep = Annotated[
    RunId,
    Path(
        description="The id of a run, as the service gave it.",
        # Only described: an id of another form names no run, which is 404 and not 422.
        json_schema_extra={"pattern": RUN_ID_PATTERN},
    ),
]


def query_parameters(request: Request) -> dict[str, str]:
    """Return the query parameters; each may stand once.

    Raises the problem 400 where the query cannot be decoded, and 422 for doubled parameters.
    """
    query: bytes = request.scope["query_string"]
    try:
        pairs = parse_qsl(
            query.decode("ascii"),
            keep_blank_values=True,
            errors="strict",
            max_num_fields=PARAMETERS_MAX,
        )
    except ValueError as error:
        raise Problem(
            kinds.UNREADABLE_REQUEST,
            f"The query is not percent-encoded UTF-8 of at most {PARAMETERS_MAX} parameters.",
        ) from error
    values: dict[str, str] = {}
    faults = []
    for name, value in pairs:
        if name in values:
            faults.append(
                _fault(name, "doubled_parameter", "Say this parameter once.", value),
            )
        values.setdefault(name, value)
    if faults:
        raise Problem(kinds.INVALID_PARAMETERS, "Parameters are doubled.", errors=faults)
    return values


def only_parameters(**choices: tuple[str, ...]) -> Callable[[Request], dict[str, str]]:
    """Return a dependency that admits the named query parameters alone, with their values."""

    def check(request: Request) -> dict[str, str]:
        values = query_parameters(request)
        faults = []
        for name, value in values.items():
            if name not in choices:
                known = f"It has: {', '.join(choices)}." if choices else "It has none."
                detail = f"This resource has no such parameter. {known}"
                faults.append(_fault(name, "unknown_parameter", detail, value))
            elif value not in choices[name]:
                detail = f"Say one of: {', '.join(choices[name])}."
                faults.append(_fault(name, "bad_parameter", detail, value))
        if faults:
            raise Problem(
                kinds.INVALID_PARAMETERS, "The query parameters have faults.", errors=faults
            )
        return values

    return check


NoParameters: Any = Depends(only_parameters())
"""For the dependencies of a route that has no query parameters."""


def _fault(name: str, code: str, detail: str, value: str) -> Fault:
    """Return a fault of a query parameter."""
    return Fault(
        pointer=value_text(f"?{name}") or "?", code=code, detail=detail, value=value_text(value)
    )
