"""Puts the HTTP door together: routes, layers, problems and pages around one ``Application``."""

from typing import Any, Final

from anyio import CapacityLimiter
from fastapi import FastAPI

from service.doors.http import documentation, problems
from service.doors.http.dependencies import Door
from service.doors.http.openapi import describe, examples_folder, read_examples
from service.doors.http.request_scope import HeadRequests, RequestScope
from service.doors.http.routes import artefacts, health, runs, template
from service.doors.http.security import LocalDoor
from service.doors.http.spool import Spool
from service.network.schema import network_schema
from service.runs.use_cases import Application
from service.settings import Settings

# Each holds a file and, while it waits for its check, nothing else; more at once would be an
# attack or a mistake on a service that plans one network at a time.
BODIES_MAX: Final = 32


def create_app(application: Application, settings: Settings) -> FastAPI:
    """Return the ASGI application that offers ``application`` over HTTP."""
    app = described_app()
    spool = Spool(settings.data / "spool", wire_bytes_max=settings.body_wire_bytes_max)
    spool.prepare()
    app.state.door = Door(
        application=application,
        spool=spool,
        intake_slots=CapacityLimiter(settings.intake_slots),
        bodies_max=BODIES_MAX,
        bodies=[],
    )
    # The last one added is the outermost.
    app.add_middleware(LocalDoor)
    app.add_middleware(HeadRequests)
    app.add_middleware(RequestScope)
    return app


def described_app() -> FastAPI:
    """Return the routes and their description, with nothing behind them yet."""
    app = FastAPI(
        title="Lanewright",
        # All three are our own: FastAPI's pages load from other hosts.
        docs_url=None,
        redoc_url=None,
        openapi_url=None,
        redirect_slashes=False,
    )
    app.state.network_schema = network_schema()
    app.include_router(health.router)
    app.include_router(runs.router)
    app.include_router(artefacts.router)
    app.include_router(template.router)
    documentation.install(app)
    problems.install(app)

    def described() -> dict[str, Any]:
        if app.openapi_schema is None:
            app.openapi_schema = describe(app, read_examples(examples_folder()))
        return app.openapi_schema

    app.openapi = described  # type: ignore[method-assign] # FastAPI documents this way of extending
    return app
