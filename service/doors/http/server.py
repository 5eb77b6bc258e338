"""How the door is opened: the HTTP server and its limits."""

import socket
from typing import Final

import uvicorn
from fastapi import FastAPI

# Twice what the door accepts, so that it is the door that answers, with a problem; beyond this
# the server hangs up with a bare 400.
HEADER_BYTES_BUFFERED_MAX: Final = 64 * 1024
KEEP_ALIVE_SECONDS: Final = 30
# Whoever stops the service waits this long for answers that are under way.
DRAIN_SECONDS: Final = 10
CONNECTIONS_WAITING_MAX: Final = 256


def listen(host: str, port: int) -> socket.socket:
    """Return a socket that listens on ``host``; with port 0 the system chooses a free one.

    Raises ``OSError`` when the address is taken, which the caller can tell before anything else
    was started.
    """
    family = socket.AF_INET6 if ":" in host else socket.AF_INET
    listening = socket.socket(family, socket.SOCK_STREAM)
    listening.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
    try:
        listening.bind((host, port))
    except OSError:
        listening.close()
        raise
    listening.listen(CONNECTIONS_WAITING_MAX)
    return listening


def http_server(app: FastAPI) -> uvicorn.Server:
    """Return the server for ``app``; run it with ``run(sockets=[listen(...)])``.

    It logs nothing of its own form: logs are ``telemetry.py``'s, requests ``request_scope.py``'s.
    """
    return uvicorn.Server(
        uvicorn.Config(
            app,
            http="h11",
            ws="none",
            h11_max_incomplete_event_size=HEADER_BYTES_BUFFERED_MAX,
            timeout_keep_alive=KEEP_ALIVE_SECONDS,
            timeout_graceful_shutdown=DRAIN_SECONDS,
            # Nothing may claim to speak for another client: there is no proxy on the loopback.
            proxy_headers=False,
            server_header=False,
            access_log=False,
            log_config=None,
        )
    )
