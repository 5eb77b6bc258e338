"""Pieces of the interface description that several operations share."""

from collections.abc import Mapping
from typing import Any, Final

from service.doors.http import problem_kinds as kinds
from service.doors.http.problem_kinds import ProblemKind
from service.doors.http.problems import MEDIA_TYPE

REQUEST_ID_EXAMPLE: Final = "5f0c1b7e9a3d4f5286c0d9e8b7a61234"

# What any request to this door can be answered with, whatever it is for.
EVERYWHERE: Final = (
    kinds.UNREADABLE_REQUEST,
    kinds.FOREIGN_ORIGIN,
    kinds.ADDRESS_TOO_LONG,
    kinds.WRONG_HOST,
    kinds.HEADERS_TOO_LARGE,
    kinds.INTERNAL,
)


def problem_responses(*own: ProblemKind) -> dict[int | str, dict[str, Any]]:
    """Return the problem responses of an operation: its ``own`` and those of every request."""
    responses: dict[int | str, dict[str, Any]] = {}
    for kind in sorted({*own, *EVERYWHERE}, key=lambda kind: (kind.status, kind.slug)):
        response = responses.setdefault(
            kind.status,
            {
                "description": "",
                "headers": {"X-Request-ID": REQUEST_ID_HEADER},
                "content": {
                    MEDIA_TYPE: {
                        "schema": {"$ref": "#/components/schemas/ProblemOut"},
                        "examples": {},
                    }
                },
            },
        )
        titles = [response["description"], kind.title]
        response["description"] = "; or: ".join(title for title in titles if title)
        response["content"][MEDIA_TYPE]["examples"][kind.slug] = {"value": _example(kind)}
        if kind in {kinds.BUSY, kinds.NOT_READY, kinds.ARTEFACT_MISSING}:
            response["headers"]["Retry-After"] = RETRY_AFTER_HEADER
        if kind is kinds.NOT_ACCEPTABLE:
            response["headers"]["Vary"] = {
                "description": "Accept: the answer depends on it.",
                "schema": {"type": "string"},
            }
    return responses


def _example(kind: ProblemKind) -> Mapping[str, object]:
    """Return an example of a problem of ``kind``."""
    return {
        "type": kind.address,
        "title": kind.title,
        "status": kind.status,
        "detail": kind.meaning,
        "instance": "/v1/runs",
        "request_id": REQUEST_ID_EXAMPLE,
    }


REQUEST_ID_HEADER: Final = {
    "description": "The id of this request: the one that was sent, if it is up to 64 letters, "
    "digits, points, tildes, hyphens and underscores, else a new one.",
    "schema": {"type": "string"},
    "example": REQUEST_ID_EXAMPLE,
}
RETRY_AFTER_HEADER: Final = {
    "description": "Seconds after which asking again is worth while.",
    "schema": {"type": "integer", "minimum": 0},
    "example": 1,
}
ETAG_HEADER: Final = {
    "description": "Made from the digest of what is answered; send it back as If-None-Match.",
    "schema": {"type": "string"},
}
NOT_MODIFIED: Final[dict[str, Any]] = {
    "description": "The client holds this representation already.",
    "headers": {"ETag": ETAG_HEADER, "X-Request-ID": REQUEST_ID_HEADER},
}
IF_NONE_MATCH: Final[dict[str, Any]] = {
    "name": "If-None-Match",
    "in": "header",
    "required": False,
    "description": "Entity tags that the client holds.",
    "schema": {"type": "string"},
}
