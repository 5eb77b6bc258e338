"""What surrounds every request: its id, its line in the log, and the headers of every answer.

Pure ASGI: a layer that wraps requests and responses in objects would break streaming and the
context in which ids travel.
"""

import re
import secrets
import time
from typing import Final

import structlog
from starlette.datastructures import Headers, MutableHeaders
from starlette.types import ASGIApp, Message, Receive, Scope, Send

from service.telemetry import log_ids

# What a client may choose as an id: it goes into logs and headers, so nothing that either reads
# as more than a word.
_SANE_ID: Final = re.compile(r"[A-Za-z0-9._~-]{1,64}")

_log = structlog.get_logger(__name__)

CONTENT_SECURITY_POLICY: Final = (
    "default-src 'self'; img-src 'self' data:; object-src 'none'; base-uri 'none'; "
    "form-action 'self'; frame-ancestors 'none'"
)
ANSWER_HEADERS: Final = {
    "X-Content-Type-Options": "nosniff",
    "Content-Security-Policy": CONTENT_SECURITY_POLICY,
    "Cross-Origin-Resource-Policy": "same-origin",
    "Referrer-Policy": "no-referrer",
}


def new_request_id() -> str:
    """Return an id for a request that brought none."""
    return secrets.token_hex(16)


class RequestScope:
    """Gives each request its id, logs it once, and puts the common headers on its answer."""

    def __init__(self, app: ASGIApp) -> None:
        """Wrap ``app``."""
        self._app = app

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        """Serve one request."""
        if scope["type"] != "http":
            await self._app(scope, receive, send)
            return
        given = Headers(scope=scope).get("x-request-id", "")
        request_id = given if _SANE_ID.fullmatch(given) else new_request_id()
        scope.setdefault("state", {})["request_id"] = request_id
        began = time.monotonic()
        status = 500  # what the server makes of it when no answer was begun

        async def send_with_headers(message: Message) -> None:
            nonlocal status
            if message["type"] == "http.response.start":
                status = message["status"]
                headers = MutableHeaders(scope=message)
                headers["X-Request-ID"] = request_id
                for name, value in ANSWER_HEADERS.items():
                    headers.setdefault(name, value)
            await send(message)

        with log_ids(request_id=request_id):
            try:
                await self._app(scope, receive, send_with_headers)
            finally:
                _log.info(
                    "request",
                    method=scope["method"],
                    path=scope["path"],
                    status=status,
                    problem=scope["state"].get("problem"),
                    seconds=round(time.monotonic() - began, 4),
                )


class HeadRequests:
    """Answers HEAD as GET without the body, as RFC 9110 (9.3.2) asks of every server."""

    def __init__(self, app: ASGIApp) -> None:
        """Wrap ``app``."""
        self._app = app

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        """Serve one request."""
        if scope["type"] != "http" or scope["method"] != "HEAD":
            await self._app(scope, receive, send)
            return

        async def send_without_body(message: Message) -> None:
            if message["type"] == "http.response.body":
                message = {**message, "body": b""}
            await send(message)

        await self._app({**scope, "method": "GET"}, receive, send_without_body)
