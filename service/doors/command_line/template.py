"""``lanewright template``: the workbook to start from."""

from pathlib import Path
from typing import Annotated

import typer

from service.doors.command_line.ending import EndingError, Exit, put_lines


def template(
    file: Annotated[Path, typer.Argument(metavar="FILE", help="The workbook to write (.xlsx).")],
) -> None:
    """Write a workbook with a sheet for each table, notes on every column, and a tiny example.

    It is a network as it stands. A file that is there already is left alone. Exit codes: 0 done, 1
    it cannot be written, 2 there is such a file.
    """
    from service.doors.template_workbook import (  # noqa: PLC0415 - only this command writes it
        write_template,
    )

    try:
        # Whoever has begun to fill it in must not lose that.
        with file.open("xb"):
            pass
        write_template(file)
    except FileExistsError as error:
        detail = f"{file} is there already; name another file"
        raise EndingError(Exit.BAD_INPUT, "exists", detail) from error
    except OSError as error:
        detail = f"{file} cannot be written: {error.strerror}"
        raise EndingError(Exit.FAILED, "unwritable", detail) from error
    put_lines([f"Written to {file}. Next: lanewright check {file}"])
