"""The commands of whoever operates the service: ``serve``, ``migrate``, ``audit check``."""

from typing import Annotated

import typer

from service.doors.command_line import parameters
from service.doors.command_line.backing import Backing
from service.doors.command_line.ending import put_json, put_lines
from service.doors.command_line.verify import CODES, PROBLEMS_SHOWN

Port = Annotated[
    int | None,
    typer.Option(
        "--port", min=0, max=65535, metavar="PORT", help="Default LANEWRIGHT_PORT, else 8080."
    ),
]

audit = typer.Typer(help="Check what is stored.", no_args_is_help=True, rich_markup_mode=None)


def serve(context: typer.Context, *, port: Port = None) -> None:
    """Run the service on this machine until it is told to stop.

    It answers on the loopback address only, keeps everything in LANEWRIGHT_DATA (a folder, default
    ./lanewright-data) or in LANEWRIGHT_DATABASE (a URL), and logs JSON to standard error.
    """
    context.ensure_object(Backing).serve(port=port)


def migrate(context: typer.Context) -> None:
    """Bring the database to the form that this version needs."""
    applied = context.ensure_object(Backing).migrate()
    done = f"Applied {', '.join(applied)}. " if applied else ""
    put_lines([f"{done}The database is up to date."])


@audit.command(
    "check", epilog="Example: LANEWRIGHT_DATA=/srv/lanewright lanewright audit check --json"
)
def audit_check(context: typer.Context, *, as_json: parameters.AsJson = False) -> None:
    """Follow every chain of events and every digest in the store; name the first broken link.

    Exit codes: 0 intact, 1 broken, 2 unreadable.
    """
    found = context.ensure_object(Backing).audit()
    if as_json:
        put_json({"verdict": found.verdict, "problems": found.problems})
    else:
        problems = [
            f"  {problem['place']}: {problem['detail']} [{problem['code']}]"
            for problem in found.problems[:PROBLEMS_SHOWN]
        ]
        put_lines([found.verdict, *problems])
    raise typer.Exit(CODES[found.verdict])
