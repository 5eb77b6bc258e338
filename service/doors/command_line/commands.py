"""All commands of ``lanewright``, and how each of them ends."""

import importlib.metadata
from collections.abc import Sequence
from typing import Annotated

import typer

from service.doors.command_line import operations
from service.doors.command_line.backing import Backing, NotReadyError
from service.doors.command_line.check import check
from service.doors.command_line.demo import demo
from service.doors.command_line.ending import EndingError, Exit, put_json, put_lines, tell
from service.doors.command_line.solve import solve
from service.doors.command_line.template import template
from service.doors.command_line.verify import verify

lanewright = typer.Typer(
    name="lanewright",
    no_args_is_help=True,
    add_completion=False,
    # Plain help: it reads the same in a log, and needs no table characters.
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
)


def _tell_version(value: bool) -> None:  # noqa: FBT001 - Typer calls it so
    """Print the version and end, where it was asked for."""
    if value:
        put_lines([f"lanewright {importlib.metadata.version('lanewright')}"])
        raise typer.Exit


@lanewright.callback()
def options(
    *,
    version: Annotated[
        bool, typer.Option("--version", callback=_tell_version, is_eager=True, help="Show it.")
    ] = False,
) -> None:
    """Decide which warehouse ships how much of what, over which lane, to which ship-to."""


lanewright.command(
    epilog="Example: lanewright solve network.json --csv plan_lines > plan.csv; "
    "lanewright solve network.xlsx --xlsx plan.xlsx"
)(solve)
lanewright.command(epilog="Example: lanewright check network.json --json")(check)
lanewright.command(epilog="Example: lanewright template network.xlsx")(template)
lanewright.command(epilog="Example: lanewright verify evidence.zip")(verify)
lanewright.command(epilog="Example: lanewright demo")(demo)
lanewright.command(epilog="Example: LANEWRIGHT_DATA=/srv/lanewright lanewright serve --port 8080")(
    operations.serve
)
lanewright.command(
    epilog="Example: LANEWRIGHT_DATABASE=postgresql://localhost/lanewright lanewright migrate"
)(operations.migrate)
lanewright.add_typer(operations.audit, name="audit")


def run_command(arguments: Sequence[str], backing: Backing) -> int:
    """Run the command that ``arguments`` name and return its exit code."""
    try:
        lanewright(args=list(arguments), obj=backing, prog_name="lanewright")
    except SystemExit as ending:
        return ending.code if isinstance(ending.code, int) else Exit.DONE
    except EndingError as ending:
        if "--json" in arguments:
            put_json(ending.document())
        for line in ending.lines():
            tell(line)
        return ending.code
    except NotReadyError as error:
        tell(f"lanewright: {error}")
        return Exit.FAILED
    return Exit.DONE
