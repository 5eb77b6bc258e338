"""Pages that explain the interface: the interactive description and one page for each problem.

Everything they load is in ``static/`` beside this file; nothing comes from another host.
"""

from html import escape
from pathlib import Path
from typing import Final

from fastapi import APIRouter, FastAPI, Request
from starlette.responses import HTMLResponse, JSONResponse, Response
from starlette.staticfiles import StaticFiles

from service.doors.http import problem_kinds as kinds
from service.doors.http.problem_kinds import KINDS
from service.doors.http.problems import Problem

STATIC: Final = Path(__file__).parent / "static"

router = APIRouter(include_in_schema=False)


def install(app: FastAPI) -> None:
    """Add the pages and the files they load to ``app``."""
    app.include_router(router)
    app.mount("/static", StaticFiles(directory=STATIC), name="static")


@router.get("/")
async def read_front() -> Response:
    """Say what this is and where to go on."""
    return _page(
        "Lanewright",
        "<p>This service decides which warehouse ships how much of what, over which lane, to which "
        "ship-to, and proves every plan.</p>"
        '<ul><li><a href="/docs">The interface, to try out</a></li>'
        '<li><a href="/openapi.json">The interface as OpenAPI</a></li>'
        '<li><a href="/schemas/network.json">The network as JSON Schema</a></li>'
        '<li><a href="/problems">What can go wrong</a></li>'
        '<li><a href="/readyz">Whether the service is ready</a></li></ul>',
    )


@router.get("/docs")
async def read_docs() -> Response:
    """Show the interactive description."""
    return HTMLResponse(
        '<!doctype html>\n<html lang="en"><head><meta charset="utf-8">'
        '<meta name="viewport" content="width=device-width, initial-scale=1">'
        '<title>Lanewright: the interface</title><link rel="icon" href="data:,">'
        '<link rel="stylesheet" href="/static/swagger-ui.css"></head>'
        '<body><div id="interface"></div>'
        '<noscript><p>This page needs scripts; the same is at <a href="/openapi.json">'
        "/openapi.json</a>.</p></noscript>"
        '<script src="/static/swagger-ui-bundle.js"></script>'
        '<script src="/static/interface.js"></script></body></html>\n'
    )


@router.get("/openapi.json")
async def read_interface(request: Request) -> Response:
    """Answer the interface description."""
    app: FastAPI = request.app
    return JSONResponse(app.openapi(), headers={"Cache-Control": "no-cache"})


@router.get("/schemas/network.json")
async def read_network_schema(request: Request) -> Response:
    """Answer the JSON Schema of the network definition."""
    schema = request.app.state.network_schema
    return JSONResponse(
        schema, media_type="application/schema+json", headers={"Cache-Control": "no-cache"}
    )


@router.get("/problems")
async def read_problems() -> Response:
    """List every kind of problem."""
    rows = "".join(
        f'<tr><td>{kind.status}</td><td><a href="{kind.address}">{escape(kind.title)}</a></td></tr>'
        for kind in sorted(KINDS.values(), key=lambda kind: (kind.status, kind.slug))
    )
    return _page("What can go wrong", f"<table><tr><th>Status</th><th>What</th></tr>{rows}</table>")


@router.get("/problems/{slug}")
async def read_problem(slug: str) -> Response:
    """Explain one kind of problem."""
    kind = KINDS.get(slug)
    if kind is None:
        raise Problem(kinds.NOT_FOUND, "There is no such kind of problem; /problems lists all.")
    return _page(
        kind.title,
        f"<p>Status {kind.status}.</p><h2>What happened</h2><p>{escape(kind.meaning)}</p>"
        f"<h2>What to do</h2><p>{escape(kind.remedy)}</p>"
        "<p>The problem document itself says in its member <code>detail</code> what was the matter "
        "this time, and its <code>request_id</code> finds the request in the log.</p>"
        '<p><a href="/problems">All kinds of problems</a></p>',
    )


def _page(title: str, body: str) -> Response:
    """Return a page; ``title`` is text, ``body`` is HTML of our own making."""
    return HTMLResponse(
        '<!doctype html>\n<html lang="en"><head><meta charset="utf-8">'
        '<meta name="viewport" content="width=device-width, initial-scale=1">'
        f'<title>{escape(title)}</title><link rel="icon" href="data:,">'
        '<link rel="stylesheet" href="/static/pages.css"></head>'
        f"<body><main><h1>{escape(title)}</h1>{body}</main></body></html>\n"
    )
