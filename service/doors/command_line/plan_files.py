"""A plan written to files, for ``lanewright solve``."""

from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Annotated, Any

import typer

from service.doors.command_line.ending import EndingError, Exit
from service.doors.plan_tables import COLUMNS

Xlsx = Annotated[
    Path | None,
    typer.Option("--xlsx", metavar="FILE", help="Also write the plan as a workbook."),
]
Parquet = Annotated[
    Path | None,
    typer.Option("--parquet", metavar="FOLDER", help="Also write each table as Parquet."),
]


def write_files(plan: Mapping[str, Any], *, xlsx: Path | None, parquet: Path | None) -> None:
    """Write ``plan`` in the forms that were asked for; files that are there are replaced."""
    if xlsx is not None:
        _written(xlsx, lambda: _write_workbook(plan, xlsx))
    if parquet is not None:
        _written(parquet, lambda: _write_tables(plan, parquet))


def _write_workbook(plan: Mapping[str, Any], path: Path) -> None:
    """Write the whole plan as a workbook."""
    from service.doors.plan_workbook import write_workbook  # noqa: PLC0415 - only for --xlsx

    write_workbook(plan, path)


def _write_tables(plan: Mapping[str, Any], folder: Path) -> None:
    """Write each table of the plan into ``folder``."""
    from service.doors.plan_parquet import write_parquet  # noqa: PLC0415 - only for --parquet

    folder.mkdir(parents=True, exist_ok=True)
    for table in COLUMNS:
        write_parquet(plan, table, folder / f"{table}.parquet")


def _written(path: Path, write: Callable[[], None]) -> None:
    """Do ``write``; end the command where ``path`` cannot be written."""
    try:
        write()
    except OSError as error:
        detail = f"{path} cannot be written: {error.strerror}"
        raise EndingError(Exit.FAILED, "unwritable", detail) from error
