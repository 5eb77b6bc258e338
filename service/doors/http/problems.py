"""How everything that goes wrong is answered: RFC 9457, one form, always with the request's id.

Domain errors know no HTTP status; the one table that gives them theirs is ``PROBLEM_OF``.
"""

from collections.abc import Callable, Mapping, Sequence
from typing import Final

import orjson
import structlog
from fastapi import FastAPI, Request
from fastapi.exceptions import RequestValidationError
from starlette.exceptions import HTTPException
from starlette.responses import Response
from starlette.types import Scope

from service.doors.http import problem_kinds as kinds
from service.doors.http.problem_kinds import ProblemKind
from service.network.faults import FAULTS_REPORTED_MAX, Fault, pointer, value_text
from service.runs.faults import (
    ArtefactMissing,
    ChildCrashed,
    ChildMemory,
    ChildReleased,
    ChildTimeout,
    PlanTooLarge,
    RunUnknown,
    StoreUnavailable,
)
from service.runs.run import RunState

MEDIA_TYPE: Final = "application/problem+json"
# A second is about what a run of middling size takes; a database that restarts takes longer.
RETRY_SECONDS: Final = 1
RETRY_SECONDS_BUSY: Final = 5

UNFINISHED: Final = frozenset({RunState.WAITING, RunState.RUNNING})

_log = structlog.get_logger(__name__)


class Problem(Exception):  # noqa: N818 - RFC 9457 calls it a problem
    """An answer that is a problem; raised anywhere in this door, sent by one handler."""

    def __init__(  # noqa: PLR0913 - the members of a problem, all named
        self,
        kind: ProblemKind,
        detail: str,
        *,
        errors: Sequence[Fault] = (),
        error_count: int | None = None,
        headers: Mapping[str, str] | None = None,
        members: Mapping[str, object] | None = None,
    ) -> None:
        """Say what happened this time; ``error_count`` counts also what ``errors`` leaves out."""
        super().__init__(detail)
        self.kind = kind
        self.detail = detail
        self.errors = tuple(errors)[:FAULTS_REPORTED_MAX]
        self.error_count = len(errors) if error_count is None else error_count
        self.headers = dict(headers or {})
        self.members = dict(members or {})

    def to_document(self, *, instance: str, request_id: str) -> dict[str, object]:
        """Return the problem as a JSON object."""
        document: dict[str, object] = {
            "type": self.kind.address,
            "title": self.kind.title,
            "status": self.kind.status,
            "detail": self.detail,
            "instance": instance,
            "request_id": request_id,
            **self.members,
        }
        if self.errors:
            document["errors"] = [fault.to_document() for fault in self.errors]
            document["error_count"] = self.error_count
        return document


def problem_response(problem: Problem, scope: Scope) -> Response:
    """Return ``problem`` as the answer to the request of ``scope``."""
    state = scope.setdefault("state", {})
    # For the line that the log gets about this request.
    state["problem"] = problem.kind.slug
    request_id = state.get("request_id", "unknown")
    document = problem.to_document(instance=scope["path"], request_id=request_id)
    # The id also as a header here, because the answer to a mistake of ours leaves the application
    # outside of the layer that would add it.
    headers = {"X-Request-ID": request_id, "Cache-Control": "no-store", **problem.headers}
    return Response(
        orjson.dumps(document),
        status_code=problem.kind.status,
        headers=headers,
        media_type=MEDIA_TYPE,
    )


def _run_unknown(_error: Exception) -> Problem:
    return Problem(kinds.RUN_UNKNOWN, "There is no run with this id.")


def _artefact_missing(error: Exception) -> Problem:
    assert isinstance(error, ArtefactMissing)  # noqa: S101 - the table below pairs them
    run = error.run
    waits = run.state in UNFINISHED
    return Problem(
        kinds.ARTEFACT_MISSING,
        f"Run {run.id} is {run.state} and has no {error.artefact}"
        + (" yet." if waits else f": {run.detail or run.reason or 'it ended without one'}"),
        headers={"Retry-After": str(RETRY_SECONDS)} if waits else {},
        members={"run": run.id, "state": run.state, "reason": run.reason},
    )


def _plan_too_large(error: Exception) -> Problem:
    assert isinstance(error, PlanTooLarge)  # noqa: S101 - the table below pairs them
    return Problem(
        kinds.PLAN_TOO_LARGE,
        f"Planning it would take about {error.estimated_bytes} bytes of memory; "
        f"{error.allowed_bytes} are allowed.",
        members={
            "estimated_bytes": error.estimated_bytes,
            "allowed_bytes": error.allowed_bytes,
            "setting": error.setting,
        },
    )


def _memory(_error: Exception) -> Problem:
    return Problem(
        kinds.BODY_TOO_LARGE,
        "To check this network takes more memory than the service gives to a check.",
    )


def _timeout(_error: Exception) -> Problem:
    return _busy("The check of this network took longer than allowed and was ended.")


def _released(_error: Exception) -> Problem:
    return _busy("The service is stopping.")


def _store_unavailable(_error: Exception) -> Problem:
    return _busy("The database cannot be reached at the moment.")


def _busy(detail: str) -> Problem:
    return Problem(kinds.BUSY, detail, headers={"Retry-After": str(RETRY_SECONDS_BUSY)})


PROBLEM_OF: Final[Mapping[type[Exception], Callable[[Exception], Problem]]] = {
    RunUnknown: _run_unknown,
    ArtefactMissing: _artefact_missing,
    ChildMemory: _memory,
    PlanTooLarge: _plan_too_large,
    ChildTimeout: _timeout,
    ChildReleased: _released,
    StoreUnavailable: _store_unavailable,
}


def install(app: FastAPI) -> None:
    """Let ``app`` answer every error with a problem."""

    async def answer_problem(request: Request, error: Exception) -> Response:
        assert isinstance(error, Problem)  # noqa: S101 - registered for nothing else
        return problem_response(error, request.scope)

    async def answer_domain(request: Request, error: Exception) -> Response:
        _log.warning("request_refused", error=type(error).__name__, text=str(error))
        return problem_response(PROBLEM_OF[type(error)](error), request.scope)

    app.add_exception_handler(Problem, answer_problem)
    for error in PROBLEM_OF:
        app.add_exception_handler(error, answer_domain)
    app.add_exception_handler(HTTPException, _answer_framework)
    app.add_exception_handler(RequestValidationError, _answer_validation)
    app.add_exception_handler(ChildCrashed, _answer_mistake)
    app.add_exception_handler(Exception, _answer_mistake)


async def _answer_framework(request: Request, error: Exception) -> Response:
    """Answer what the framework itself raises: no such path, no such method."""
    assert isinstance(error, HTTPException)  # noqa: S101 - registered for nothing else
    headers = dict(error.headers or {})
    if error.status_code == kinds.METHOD_NOT_ALLOWED.status:
        # RFC 9110 wants every server to answer HEAD where it answers GET, and this one does.
        allowed = headers.get("Allow", headers.get("allow", ""))
        headers = {"Allow": allowed.replace("GET", "GET, HEAD")}
        detail = f"{request.method} is not a method of this resource; it has {headers['Allow']}."
        return problem_response(
            Problem(kinds.METHOD_NOT_ALLOWED, detail, headers=headers), request.scope
        )
    if error.status_code == kinds.NOT_FOUND.status:
        problem = Problem(kinds.NOT_FOUND, "There is no resource at this path.")
        return problem_response(problem, request.scope)
    problem = Problem(kinds.UNREADABLE_REQUEST, "The request cannot be read.")
    return problem_response(problem, request.scope)


async def _answer_validation(request: Request, error: Exception) -> Response:
    """Answer what the framework finds wrong with parameters, in the form of our own faults."""
    assert isinstance(error, RequestValidationError)  # noqa: S101 - registered for nothing else
    faults = []
    for found in error.errors():
        place, *names = found["loc"]
        at = f"?{'.'.join(map(str, names))}" if place == "query" else pointer(*names)
        faults.append(
            Fault(
                pointer=at,
                code=str(found["type"]),
                detail=f"{found['msg']}.",
                value=value_text(found.get("input")),
            )
        )
    problem = Problem(kinds.INVALID_PARAMETERS, "The request has faulty parameters.", errors=faults)
    return problem_response(problem, request.scope)


async def _answer_mistake(request: Request, error: Exception) -> Response:
    """Log a mistake of ours and answer without any detail of it."""
    _log.error(
        "request_failed",
        request_id=request.scope.get("state", {}).get("request_id"),
        method=request.method,
        path=request.scope["path"],
        exc_info=error,
    )
    problem = Problem(kinds.INTERNAL, "The mistake was logged under the request id.")
    return problem_response(problem, request.scope)
