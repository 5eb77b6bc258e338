"""All commands of ``lanewright``, and how each of them ends."""

from collections.abc import Sequence

import typer

from service.doors.command_line import operations
from service.doors.command_line.backing import Backing, NotReadyError
from service.doors.command_line.check import check
from service.doors.command_line.demo import demo
from service.doors.command_line.ending import EndingError, Exit, put_json, tell
from service.doors.command_line.solve import solve
from service.doors.command_line.verify import verify

lanewright = typer.Typer(
    name="lanewright",
    help="Decides which warehouse ships how much of what, over which lane, to which ship-to.",
    no_args_is_help=True,
    add_completion=False,
    # Plain help: it reads the same in a log, and needs no table characters.
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
)
lanewright.command(epilog="Example: lanewright solve network.json --csv plan_lines > plan.csv")(
    solve
)
lanewright.command(epilog="Example: lanewright check network.json --json")(check)
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
