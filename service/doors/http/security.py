"""Who may come in while there are no keys: this machine alone, and no page of another origin.

A page from anywhere can make a browser on this machine send requests to it, also under a name that
it lets point here ("DNS rebinding"). Against the first stands the check of ``Origin``, against the
second that of ``Host``.
"""

from typing import Final

from starlette.datastructures import Headers
from starlette.types import ASGIApp, Receive, Scope, Send

from service.doors.http import problem_kinds as kinds
from service.doors.http.problems import Problem, problem_response
from service.runs.run import LOCAL, Actor

LOOPBACK_NAMES: Final = ("localhost", "127.0.0.1", "[::1]")
HTTP_PORT: Final = 80
# Room for every header that a browser or a proxy sends; far below what the server itself buffers.
HEADER_BYTES_MAX: Final = 16 * 1024
ADDRESS_BYTES_MAX: Final = 8 * 1024


def current_actor() -> Actor:
    """Return who asks: until there are keys, whoever reaches the loopback interface."""
    return LOCAL


class LocalDoor:
    """Lets requests in that were meant for this service on this machine."""

    def __init__(self, app: ASGIApp, *, port: int | None = None) -> None:
        """Wrap ``app``; ``port`` is what clients use if it is not the one that is listened on."""
        self._app = app
        self._port = port

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        """Serve one request, or refuse it."""
        if scope["type"] == "http":
            problem = self._refusal(scope)
            if problem is not None:
                await problem_response(problem, scope)(scope, receive, send)
                return
        await self._app(scope, receive, send)

    def _refusal(self, scope: Scope) -> Problem | None:
        """Return why the request is refused, or None."""
        if sum(len(name) + len(value) for name, value in scope["headers"]) > HEADER_BYTES_MAX:
            return Problem(
                kinds.HEADERS_TOO_LARGE, f"They may be {HEADER_BYTES_MAX} bytes together."
            )
        raw_path = scope.get("raw_path") or b""
        if len(raw_path) + len(scope["query_string"]) > ADDRESS_BYTES_MAX:
            return Problem(kinds.ADDRESS_TOO_LONG, f"It may be {ADDRESS_BYTES_MAX} bytes long.")
        hosts = self._hosts(scope)
        headers = Headers(scope=scope)
        if [host.lower() for host in headers.getlist("host")] not in [[host] for host in hosts]:
            return Problem(kinds.WRONG_HOST, f"Say one of: {', '.join(hosts)}.")
        origin = headers.get("origin")
        if origin is not None and origin not in [f"http://{host}" for host in hosts]:
            return Problem(kinds.FOREIGN_ORIGIN, "The header Origin names another origin.")
        return None

    def _hosts(self, scope: Scope) -> tuple[str, ...]:
        """Return the values of ``Host`` that mean this service."""
        port = self._port
        if port is None:
            server = scope.get("server")
            port = server[1] if server else None
        with_port = tuple(f"{name}:{port}" for name in LOOPBACK_NAMES)
        return with_port + LOOPBACK_NAMES if port == HTTP_PORT else with_port
